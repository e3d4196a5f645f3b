//! Rows of a text table: the header, the delimiter, the fields of a line.

use csv_core::ReadRecordResult;

use super::Block;

/// Delimiters that are looked for when none is stated, in the order of preference.
const DELIMITERS: [u8; 4] = [b',', b';', b'\t', b'|'];

/// The names of the columns.
#[derive(Debug, Clone, Default)]
pub(crate) struct Header {
    pub(crate) names: Vec<String>,
    /// Line it stands on.
    pub(crate) line: u64,
}

impl Header {
    /// Places of the columns of this name: none, one, or more.
    pub(crate) fn find<'a>(&'a self, name: &'a str) -> impl Iterator<Item = usize> + 'a {
        let named = self
            .names
            .iter()
            .enumerate()
            .filter(move |(_, n)| *n == name);
        named.map(|(place, _)| place)
    }
}

/// Takes the lines before the header and the header line off the first block.
pub(crate) fn read_header(block: &mut Block, skip_lines: u64) -> Vec<u8> {
    let mut start = 0;
    let mut line = Vec::new();
    for number in 0..=skip_lines {
        let rest = block.bytes.get(start..).unwrap_or_default();
        let end = memchr::memchr(b'\n', rest).map_or(rest.len(), |end| end + 1);
        if number == skip_lines {
            line = rest.get(..end).unwrap_or_default().to_vec();
        }
        start += end;
        block.first_line += 1;
    }
    block.bytes.drain(..start.min(block.bytes.len()));
    let line = line.strip_prefix(b"\xef\xbb\xbf").unwrap_or(&line);
    line.trim_ascii_end().to_vec()
}

/// The delimiter under which most of the wanted columns are found, and the names of the columns.
pub(crate) fn find_delimiter(
    line: &[u8],
    stated: Option<u8>,
    wanted: impl Fn(&str) -> bool,
) -> (u8, Vec<String>) {
    let mut best = (0, b',', Vec::new());
    let candidates = stated.map_or(DELIMITERS.to_vec(), |d| vec![d]);
    for delimiter in candidates {
        let mut row = Row::new(delimiter);
        let names: Vec<String> = if row.split(line, true) {
            (0..row.len())
                .map(|k| String::from_utf8_lossy(row.field(k)).into_owned())
                .collect()
        } else {
            Vec::new()
        };
        let found = names.iter().filter(|name| wanted(name)).count();
        // With nothing found, the delimiter that makes columns at all serves the error message best.
        let score = 2 * found + usize::from(names.len() > 1);
        if best.2.is_empty() || score > best.0 {
            best = (score, delimiter, names);
        }
    }
    (best.1, best.2)
}

/// The fields of one line; its buffers serve one line after the other.
pub(crate) struct Row {
    delimiter: u8,
    quotes: csv_core::Reader,
    /// The line as given, or with its quotes undone.
    text: Vec<u8>,
    scratch: Vec<u8>,
    ends: Vec<usize>,
    fields: Vec<(usize, usize)>,
}

impl Row {
    pub(crate) fn new(delimiter: u8) -> Self {
        Self {
            delimiter,
            quotes: csv_core::ReaderBuilder::new().delimiter(delimiter).build(),
            text: Vec::new(),
            scratch: Vec::new(),
            ends: Vec::new(),
            fields: Vec::new(),
        }
    }

    /// Splits a line; false if a quote does not end on it. `quotes` says whether the line may hold any.
    pub(crate) fn split(&mut self, line: &[u8], quotes: bool) -> bool {
        self.fields.clear();
        self.text.clear();
        if quotes && memchr::memchr(b'"', line).is_some() {
            return self.split_quoted(line);
        }
        self.text.extend_from_slice(line);
        let mut start = 0;
        for end in memchr::memchr_iter(self.delimiter, line) {
            self.fields.push((start, end));
            start = end + 1;
        }
        self.fields.push((start, line.len()));
        true
    }

    fn split_quoted(&mut self, line: &[u8]) -> bool {
        self.scratch.clear();
        self.scratch.extend_from_slice(line);
        // The line end ends the record, unless a quote is still open: then it would be text.
        self.scratch.push(b'\n');
        self.text.resize(self.scratch.len(), 0);
        self.ends.resize(self.scratch.len() + 1, 0);
        self.quotes.reset();
        let (outcome, _, _, fields) =
            self.quotes
                .read_record(&self.scratch, &mut self.text, &mut self.ends);
        if outcome != ReadRecordResult::Record {
            return false;
        }
        let mut start = 0;
        for &end in self.ends.get(..fields).unwrap_or_default() {
            self.fields.push((start, end));
            start = end;
        }
        true
    }

    /// How many fields the line has.
    pub(crate) fn len(&self) -> usize {
        self.fields.len()
    }

    /// A field without the white space around it; empty beyond the end of the line.
    pub(crate) fn field(&self, column: usize) -> &[u8] {
        self.get(column).unwrap_or_default()
    }

    /// The same; `None` beyond the end of the line.
    pub(crate) fn get(&self, column: usize) -> Option<&[u8]> {
        let &(start, end) = self.fields.get(column)?;
        Some(self.text.get(start..end)?.trim_ascii())
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn fields(line: &str, delimiter: u8) -> Option<Vec<String>> {
        let mut row = Row::new(delimiter);
        row.split(line.as_bytes(), true).then(|| {
            (0..row.len())
                .map(|k| String::from_utf8_lossy(row.field(k)).into_owned())
                .collect()
        })
    }

    #[test]
    fn fields_with_and_without_quotes() {
        assert_eq!(
            fields("a, b ,,c", b','),
            Some(["a", "b", "", "c"].map(String::from).to_vec())
        );
        assert_eq!(
            fields("\"a;b\";c\"\"\";\"d \"\"e\"\"\"", b';'),
            Some(["a;b", "c\"\"\"", "d \"e\""].map(String::from).to_vec())
        );
        assert_eq!(fields("a,\"b", b','), None);
        assert_eq!(fields("", b','), Some(vec![String::new()]));
    }

    #[test]
    fn the_delimiter_is_the_one_that_finds_the_columns() {
        let wanted = |name: &str| ["time", "speed (m/s, mean)"].contains(&name);
        let (delimiter, names) = find_delimiter(b"time;speed (m/s, mean);x,y", None, wanted);
        assert_eq!((delimiter, names.len()), (b';', 3));
        assert_eq!(find_delimiter(b"time\tspeed", None, wanted).0, b'\t');
        assert_eq!(find_delimiter(b"a,b,c", None, wanted).0, b',');
        assert_eq!(find_delimiter(b"", None, wanted).1, [""]);
    }

    #[test]
    fn the_header_follows_the_preamble() {
        let mut block = Block {
            bytes: b"\xef\xbb\xbfstation data\nunits\nid,t\r\nA,1\n".to_vec(),
            first_line: 1,
            overlong: None,
        };
        assert_eq!(read_header(&mut block, 2), b"id,t");
        assert_eq!(
            (block.bytes.as_slice(), block.first_line),
            (b"A,1\n".as_slice(), 4)
        );
        assert_eq!(read_header(&mut block, 9), b"");
    }
}
