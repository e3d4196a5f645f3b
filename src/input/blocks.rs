//! Cuts an input into blocks of whole lines, so that blocks can be read in parallel.

use std::io::{self, Read};

/// Size of a block, bytes: large enough to make the cost of a block small, small enough to stay in the cache.
pub(crate) const BLOCK: usize = 1 << 18;
/// A longer line is no row; it is skipped and counted.
const LONGEST_LINE: usize = 1 << 20;

/// Whole lines of an input.
#[derive(Debug, Default)]
pub(crate) struct Block {
    /// The bytes; the last line may lack its line end only at the end of the input.
    pub bytes: Vec<u8>,
    /// Number of the first line, from 1.
    pub first_line: u64,
    /// Number of a line that was too long and skipped; it stood after `bytes`.
    pub overlong: Option<u64>,
}

/// Reads an input block by block.
pub(crate) struct Blocks<R> {
    input: R,
    size: usize,
    /// The start of a line whose end was not read yet.
    rest: Vec<u8>,
    /// Buffers given back.
    spare: Vec<Vec<u8>>,
    line: u64,
    ended: bool,
    /// What ended the input before its end; it is told after the bytes before it.
    failure: Option<io::Error>,
}

impl<R: Read> Blocks<R> {
    /// Cuts an input into blocks of about `size` bytes.
    pub(crate) fn new(input: R, size: usize) -> Self {
        Self {
            input,
            size,
            rest: Vec::new(),
            spare: Vec::new(),
            line: 1,
            ended: false,
            failure: None,
        }
    }

    /// The next block; `None` at the end of the input. An error comes after the lines that were read before it.
    pub(crate) fn next_block(&mut self) -> io::Result<Option<Block>> {
        let mut bytes = self.spare.pop().unwrap_or_default();
        bytes.clear();
        // One allocation for the whole block; the size never grows beyond it.
        bytes.reserve_exact(self.size);
        bytes.append(&mut self.rest);
        loop {
            if !self.ended {
                // A line longer than a block makes it grow, up to the longest line there may be.
                let want = self.size.saturating_sub(bytes.len()).max(self.size / 4) as u64;
                match self.input.by_ref().take(want).read_to_end(&mut bytes) {
                    Ok(got) => self.ended = (got as u64) < want,
                    Err(error) => {
                        // What was read before it stands in `bytes`; a line that was cut is no row.
                        let whole = memchr::memrchr(b'\n', &bytes).map_or(0, |end| end + 1);
                        bytes.truncate(whole);
                        self.failure = Some(error);
                        self.ended = true;
                    }
                }
            }
            if self.ended {
                if bytes.is_empty()
                    && let Some(error) = self.failure.take()
                {
                    return Err(error);
                }
                return Ok((!bytes.is_empty()).then(|| self.block(bytes, None)));
            }
            if let Some(end) = memchr::memrchr(b'\n', &bytes) {
                self.rest.extend_from_slice(&bytes[end + 1..]); // end < bytes.len()
                bytes.truncate(end + 1);
                return Ok(Some(self.block(bytes, None)));
            }
            if bytes.len() >= LONGEST_LINE {
                self.skip_line()?;
                let line = self.line;
                self.line += 1;
                let block = self.block(Vec::new(), Some(line));
                return Ok(Some(block));
            }
        }
    }

    /// Takes the buffer of a block that is done with.
    pub(crate) fn give_back(&mut self, buffer: Vec<u8>) {
        self.spare.push(buffer);
    }

    fn block(&mut self, bytes: Vec<u8>, overlong: Option<u64>) -> Block {
        let first_line = self.line;
        self.line += memchr::memchr_iter(b'\n', &bytes).count() as u64;
        Block {
            bytes,
            first_line,
            overlong,
        }
    }

    /// Throws away the rest of a line that is too long.
    fn skip_line(&mut self) -> io::Result<()> {
        loop {
            let mut buffer = Vec::new();
            let got = self
                .input
                .by_ref()
                .take(BLOCK as u64)
                .read_to_end(&mut buffer)?;
            if let Some(end) = memchr::memchr(b'\n', &buffer) {
                self.rest = buffer.split_off(end + 1);
                return Ok(());
            }
            if got < BLOCK {
                self.ended = true;
                return Ok(());
            }
        }
    }
}

#[cfg(test)]
#[expect(clippy::unwrap_used, reason = "a test may panic")]
mod tests {
    use super::*;

    fn all(text: &[u8]) -> Vec<Block> {
        let mut blocks = Blocks::new(text, BLOCK);
        let mut out = Vec::new();
        while let Some(block) = blocks.next_block().unwrap() {
            out.push(block);
        }
        out
    }

    #[test]
    fn blocks_join_to_the_input_and_count_lines() {
        let mut text = Vec::new();
        for i in 0..200_000 {
            text.extend_from_slice(format!("line {i}\n").as_bytes());
        }
        text.extend_from_slice(b"last");
        let blocks = all(&text);
        assert!(blocks.len() > 1);
        let joined: Vec<u8> = blocks.iter().flat_map(|b| b.bytes.clone()).collect();
        assert_eq!(joined, text);
        for block in &blocks {
            let start = format!("line {}\n", block.first_line - 1);
            assert!(block.bytes.starts_with(start.as_bytes()));
        }
    }

    #[test]
    fn a_line_of_many_megabytes_is_skipped_and_named() {
        let mut text = b"a\n".to_vec();
        text.resize(5 << 20, b'x');
        text.extend_from_slice(b"\nb\n");
        let blocks = all(&text);
        assert_eq!(
            blocks.iter().filter_map(|b| b.overlong).collect::<Vec<_>>(),
            [2]
        );
        let last = blocks.last().unwrap();
        assert_eq!(
            (last.bytes.as_slice(), last.first_line),
            (b"b\n".as_slice(), 3)
        );
        assert!(all(b"").is_empty());
    }
}
