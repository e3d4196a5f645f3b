//! Opens inputs: plain, gzip or Zstandard by their first bytes, standard input as `-`.

use std::fs::File;
use std::io::{self, BufRead, BufReader, Read};
use std::path::Path;

/// First bytes of gzip (RFC 1952) and Zstandard (RFC 8878).
const GZIP: [u8; 2] = [0x1f, 0x8b];
const ZSTANDARD: [u8; 4] = [0x28, 0xb5, 0x2f, 0xfd];

/// Opens an input for reading; what is compressed comes out plain. `-` is standard input.
///
/// # Errors
/// The system's refusal; a folder is no file.
pub fn open(path: &Path) -> io::Result<Box<dyn Read + Send>> {
    if path == Path::new("-") {
        return plain(BufReader::with_capacity(1 << 16, io::stdin()));
    }
    if path.is_dir() {
        return Err(io::Error::new(
            io::ErrorKind::IsADirectory,
            "it is a folder, not a file",
        ));
    }
    plain(BufReader::with_capacity(1 << 16, File::open(path)?))
}

fn plain(mut input: BufReader<impl Read + Send + 'static>) -> io::Result<Box<dyn Read + Send>> {
    let start = input.fill_buf()?;
    if start.starts_with(&GZIP) {
        return Ok(Box::new(flate2::bufread::MultiGzDecoder::new(input)));
    }
    if start.starts_with(&ZSTANDARD) {
        return Ok(Box::new(zstd::Decoder::with_buffer(input)?));
    }
    Ok(Box::new(input))
}

/// All of an input, at most `limit` bytes.
pub(crate) fn read_all(path: &Path, limit: u64) -> io::Result<Vec<u8>> {
    let mut bytes = Vec::new();
    open(path)?.take(limit + 1).read_to_end(&mut bytes)?;
    if bytes.len() as u64 > limit {
        let message = format!("it is larger than {} MiB", limit >> 20);
        return Err(io::Error::new(io::ErrorKind::FileTooLarge, message));
    }
    Ok(bytes)
}

/// Latin-1 as UTF-8: each byte is the character of its number. Lines stay as they are.
pub(crate) fn latin1_to_utf8(bytes: &[u8]) -> Vec<u8> {
    let text: String = bytes.iter().map(|&byte| char::from(byte)).collect();
    text.into_bytes()
}

#[cfg(test)]
#[expect(clippy::unwrap_used, reason = "a test may panic")]
mod tests {
    use std::io::Write;

    use super::*;

    #[test]
    fn compression_is_seen_in_the_content_not_the_name() {
        let folder = tempfile::tempdir().unwrap();
        let text = b"a,b\n1,2\n";
        let mut gzip = flate2::write::GzEncoder::new(Vec::new(), flate2::Compression::fast());
        gzip.write_all(text).unwrap();
        let gzip = gzip.finish().unwrap();
        let zstandard = zstd::encode_all(&text[..], 1).unwrap();
        // Two members one after the other are one file.
        let twice = [gzip.clone(), gzip.clone()].concat();
        for (bytes, expected) in [
            (text.to_vec(), text.to_vec()),
            (gzip, text.to_vec()),
            (zstandard, text.to_vec()),
            (twice, [&text[..], text].concat()),
        ] {
            let path = folder.path().join("table.txt");
            std::fs::write(&path, bytes).unwrap();
            assert_eq!(read_all(&path, 100).unwrap(), expected);
        }
        assert!(read_all(&folder.path().join("table.txt"), 10).is_err());
        assert!(open(folder.path()).is_err());
    }

    #[test]
    fn latin1_letters_become_utf8() {
        assert_eq!(latin1_to_utf8(b"Z\xfcrich"), "Zürich".as_bytes());
    }
}
