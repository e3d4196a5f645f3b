//! Station lists as text tables.

use std::borrow::Cow;
use std::io::{self, Read};

use super::entry::{Field, Whence};
use super::list::ListBuilder;
use super::{Catalogue, StationList, missing_column};
use crate::error::{Place, Problem};
use crate::input::{Block, Blocks, Header, Splitter, find_delimiter, latin1_to_utf8, read_header};

/// Reads a table; the inner error holds its defects.
pub(super) fn read_table<R: Read>(
    file: &str,
    mut blocks: Blocks<R>,
    catalogue: &Catalogue,
) -> io::Result<Result<StationList, Vec<Problem>>> {
    let mut first = blocks.next_block()?.unwrap_or(Block {
        first_line: 1,
        ..Block::default()
    });
    let mut line = read_header(&mut first, catalogue.text.skip_lines);
    if catalogue.text.latin1 {
        line = latin1_to_utf8(&line);
    }
    let layout = match Layout::new(file, &line, catalogue) {
        Ok(layout) => layout,
        Err(problems) => return Ok(Err(problems)),
    };
    let mut reader = TableReader {
        splitter: Splitter::new(layout.delimiter),
        layout,
        latin1: catalogue.text.latin1,
        builder: ListBuilder::new(file, catalogue, catalogue.text.decimal_comma),
        not_utf8: None,
    };
    reader.block(&first);
    while let Some(block) = blocks.next_block()? {
        reader.block(&block);
        blocks.give_back(block.bytes);
    }
    if let Some((line, more)) = reader.not_utf8 {
        let more = match more {
            0 => String::new(),
            more => format!("; {more} more lines are like it"),
        };
        reader.builder.broken(
            line,
            format!("the line is not UTF-8 text (is `encoding = \"latin-1\"` meant?){more}"),
        );
    }
    Ok(reader.builder.finish())
}

/// Where the fields stand in a line.
struct Layout {
    delimiter: u8,
    places: Vec<(Field, usize)>,
}

impl Layout {
    /// Finds the columns in the header; names those found when one is missing.
    fn new(file: &str, line: &[u8], catalogue: &Catalogue) -> Result<Self, Vec<Problem>> {
        let columns = &catalogue.columns;
        let wanted = |name: &str| columns.named().any(|(_, column)| column == name);
        let stated = catalogue.text.delimiter.and_then(|d| u8::try_from(d).ok());
        let (delimiter, mut names) = find_delimiter(line, stated, wanted);
        if line.is_empty() {
            names.clear();
        }
        let header = Header {
            names,
            line: catalogue.text.skip_lines + 1,
        };
        let mut places = Vec::new();
        let mut problems = Vec::new();
        for (field, column) in columns.named() {
            let found: Vec<usize> = header.find(column).collect();
            match found[..] {
                [place] => places.push((field, place)),
                [] => {
                    let names = header.names.iter().map(String::as_str);
                    let mut problem = missing_column(file, column, names);
                    problem.place.line = Some(header.line);
                    problems.push(problem);
                }
                _ => {
                    let place = Place {
                        file: file.into(),
                        line: Some(header.line),
                        column: Some(column.into()),
                    };
                    problems.push(Problem::new(place, "there is more than one such column"));
                }
            }
        }
        if problems.is_empty() {
            Ok(Self { delimiter, places })
        } else {
            Err(problems)
        }
    }

    fn place(&self, field: Field) -> Option<usize> {
        let found = self.places.iter().find(|(f, _)| *f == field);
        found.map(|&(_, place)| place)
    }
}

struct TableReader<'a> {
    splitter: Splitter,
    layout: Layout,
    latin1: bool,
    builder: ListBuilder<'a>,
    /// First line that is not UTF-8, and how many more there are.
    not_utf8: Option<(u64, u64)>,
}

impl TableReader<'_> {
    fn block(&mut self, block: &Block) {
        let bytes = if self.latin1 {
            Cow::Owned(latin1_to_utf8(&block.bytes))
        } else {
            Cow::Borrowed(&block.bytes)
        };
        for (number, line) in (block.first_line..).zip(bytes.split(|&b| b == b'\n')) {
            self.line(number, line.trim_ascii_end());
        }
        if let Some(number) = block.overlong {
            self.builder
                .broken(number, "the line is longer than 1 MiB".into());
        }
    }

    fn line(&mut self, number: u64, line: &[u8]) {
        if std::str::from_utf8(line).is_err() {
            match &mut self.not_utf8 {
                None => self.not_utf8 = Some((number, 0)),
                Some((_, more)) => *more += 1,
            }
            return;
        }
        let Some(row) = self.splitter.split(line) else {
            self.builder
                .broken(number, "a quote does not end on its line".into());
            return;
        };
        if row.is_blank() {
            return;
        }
        let layout = &self.layout;
        let texts = |field| {
            let place = layout.place(field);
            String::from_utf8_lossy(place.map_or(&b""[..], |place| row.field(place)))
        };
        self.builder.add(Whence::Line(number), &texts, None);
    }
}
