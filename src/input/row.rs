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
        let mut splitter = Splitter::new(delimiter);
        let names: Vec<String> = splitter.split(line).map_or_else(Vec::new, |row| {
            (0..row.len())
                .map(|k| String::from_utf8_lossy(row.field(k)).into_owned())
                .collect()
        });
        let found = names.iter().filter(|name| wanted(name)).count();
        // With nothing found, the delimiter that makes columns at all serves the error message best.
        let score = 2 * found + usize::from(names.len() > 1);
        if best.2.is_empty() || score > best.0 {
            best = (score, delimiter, names);
        }
    }
    (best.1, best.2)
}

/// The fields of one line.
#[derive(Debug, Clone, Copy)]
pub(crate) struct Row<'a> {
    text: &'a [u8],
    /// Where the first field starts in `text`.
    start: u32,
    /// Where each field ends.
    ends: &'a [u32],
    /// Bytes between a field's end and the next one's start: the delimiter, or nothing.
    between: u32,
}

impl<'a> Row<'a> {
    /// Fields of a text by the start of the first and the end of each, with one delimiter between them.
    pub(crate) fn new(text: &'a [u8], start: u32, ends: &'a [u32]) -> Self {
        Self {
            text,
            start,
            ends,
            between: 1,
        }
    }

    /// How many fields the line has.
    pub(crate) fn len(&self) -> usize {
        self.ends.len()
    }

    /// True if nothing but white space and delimiters is on the line.
    pub(crate) fn is_blank(&self) -> bool {
        (0..self.len()).all(|column| self.field(column).is_empty())
    }

    /// A field without the white space around it; empty beyond the end of the line.
    pub(crate) fn field(&self, column: usize) -> &'a [u8] {
        self.get(column).unwrap_or_default()
    }

    /// The same; `None` beyond the end of the line.
    #[inline]
    pub(crate) fn get(&self, column: usize) -> Option<&'a [u8]> {
        let end = *self.ends.get(column)?;
        let start = match column.checked_sub(1) {
            Some(before) => self.ends.get(before)? + self.between,
            None => self.start,
        };
        let field = self.text.get(start as usize..end as usize)?;
        // Most fields have no white space around them.
        match field {
            [] => Some(field),
            [first, .., last] | [first @ last] if *first > b' ' && *last > b' ' => Some(field),
            _ => Some(field.trim_ascii()),
        }
    }
}

/// Finds the places of all delimiters and line ends of a text without quotes, eight bytes at a time.
pub(crate) fn find_separators(text: &[u8], delimiter: u8, out: &mut Vec<u32>) {
    const LOW: u64 = 0x7f7f_7f7f_7f7f_7f7f;
    // The top bit of each byte that is 0, exactly (Mycroft's test without its false alarms; common practice).
    let zero_bytes = |x: u64| !(((x & LOW) + LOW) | x | LOW);
    let ends = u64::from_ne_bytes([b'\n'; 8]);
    let delimiters = u64::from_ne_bytes([delimiter; 8]);
    out.clear();
    let (words, rest) = text.as_chunks::<8>();
    let mut start = 0;
    for word in words {
        // Little end first, so that the lowest bit belongs to the first byte.
        let word = u64::from_le_bytes(*word);
        let mut hits = zero_bytes(word ^ ends) | zero_bytes(word ^ delimiters);
        while hits != 0 {
            out.push(start + hits.trailing_zeros() / 8);
            hits &= hits - 1;
        }
        start += 8;
    }
    for (k, &byte) in (0..).zip(rest) {
        if byte == b'\n' || byte == delimiter {
            out.push(start + k);
        }
    }
}

/// Splits single lines, with or without quotes; its buffers serve one line after the other.
pub(crate) struct Splitter {
    delimiter: u8,
    quotes: csv_core::Reader,
    line: Vec<u8>,
    text: Vec<u8>,
    long_ends: Vec<usize>,
    ends: Vec<u32>,
}

impl Splitter {
    pub(crate) fn new(delimiter: u8) -> Self {
        Self {
            delimiter,
            quotes: csv_core::ReaderBuilder::new().delimiter(delimiter).build(),
            line: Vec::new(),
            text: Vec::new(),
            long_ends: Vec::new(),
            ends: Vec::new(),
        }
    }

    /// The fields of a line of less than 4 GiB; `None` if a quote does not end on it.
    pub(crate) fn split(&mut self, line: &[u8]) -> Option<Row<'_>> {
        self.line.clear();
        self.line.extend_from_slice(line);
        // The line end ends the record, unless a quote is still open: then it would be text.
        self.line.push(b'\n');
        if memchr::memchr(b'"', line).is_none() {
            find_separators(&self.line, self.delimiter, &mut self.ends);
            return Some(Row::new(&self.line, 0, &self.ends));
        }
        self.text.resize(self.line.len(), 0);
        self.long_ends.resize(self.line.len() + 1, 0);
        self.quotes.reset();
        let (outcome, _, _, fields) =
            self.quotes
                .read_record(&self.line, &mut self.text, &mut self.long_ends);
        if outcome != ReadRecordResult::Record {
            return None;
        }
        self.ends.clear();
        let ends = self.long_ends.get(..fields).unwrap_or_default();
        self.ends.extend(
            ends.iter()
                .map(|&end| u32::try_from(end).unwrap_or(u32::MAX)),
        );
        Some(Row {
            between: 0,
            ..Row::new(&self.text, 0, &self.ends)
        })
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn fields(line: &str, delimiter: u8) -> Option<Vec<String>> {
        let mut splitter = Splitter::new(delimiter);
        let row = splitter.split(line.as_bytes())?;
        let field = |k| String::from_utf8_lossy(row.field(k)).into_owned();
        Some((0..row.len()).map(field).collect())
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

    proptest::proptest! {
        #[test]
        fn separators_are_where_a_plain_loop_finds_them(text in "[ -~\n\u{80}-\u{ff},;]{0,100}") {
            let mut found = Vec::new();
            find_separators(text.as_bytes(), b';', &mut found);
            let expected: Vec<u32> = (0..)
                .zip(text.bytes())
                .filter(|(_, b)| matches!(b, b';' | b'\n'))
                .map(|(k, _)| k)
                .collect();
            proptest::prop_assert_eq!(found, expected);
        }
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
