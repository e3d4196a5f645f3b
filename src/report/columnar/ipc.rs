//! Arrow IPC files. What they say of their own lengths is checked before the library takes memory for it.

use std::fs::File;
use std::io::{self, Read, Seek, SeekFrom};
use std::sync::Arc;

use arrow_array::RecordBatch;
use arrow_buffer::Buffer;
use arrow_ipc::convert::fb_to_schema;
use arrow_ipc::reader::{FileDecoder, read_footer_length};
use arrow_ipc::{Block, MetadataVersion, root_as_footer, root_as_message};
use arrow_schema::{Schema, SchemaRef};

use super::open::{arrow_error, damaged};

/// Largest column of one batch, bytes: more than any writer puts into one, and less than an address space.
const LARGEST: i64 = 1 << 32;

/// An Arrow IPC file of which the footer was read.
pub(super) struct IpcTable {
    file: File,
    schema: SchemaRef,
    version: MetadataVersion,
    dictionaries: Vec<Block>,
    batches: Vec<Block>,
}

impl IpcTable {
    pub(super) fn open(mut file: File) -> io::Result<Self> {
        let size = file.metadata()?.len();
        // The length of the footer, 4 bytes, and the magic.
        let mut end = [0; 10];
        let before_end = size
            .checked_sub(end.len() as u64)
            .ok_or_else(|| damaged("the file is cut short"))?;
        file.seek(SeekFrom::Start(before_end))?;
        file.read_exact(&mut end)?;
        let length = read_footer_length(end).map_err(|_| {
            damaged("the file is cut short: its last bytes are not those of Arrow IPC")
        })?;
        let start = before_end
            .checked_sub(length as u64)
            .ok_or_else(|| damaged("the footer is longer than the file"))?;
        file.seek(SeekFrom::Start(start))?;
        let mut footer = vec![0; length];
        file.read_exact(&mut footer)?;
        let footer = root_as_footer(&footer).map_err(|error| damaged(error.to_string()))?;
        let schema = footer
            .schema()
            .ok_or_else(|| damaged("the file has no schema"))?;
        if !schema.endianness().equals_to_target_endianness() {
            return Err(damaged("its numbers have another order of bytes"));
        }
        Ok(Self {
            schema: Arc::new(fb_to_schema(schema)),
            version: footer.version(),
            dictionaries: footer
                .dictionaries()
                .into_iter()
                .flatten()
                .copied()
                .collect(),
            batches: footer
                .recordBatches()
                .into_iter()
                .flatten()
                .copied()
                .collect(),
            file,
        })
    }

    pub(super) fn schema(&self) -> &Schema {
        &self.schema
    }

    /// The batches of rows, with the wanted columns alone.
    pub(super) fn batches(mut self, wanted: &[usize]) -> io::Result<IpcBatches> {
        let mut decoder =
            FileDecoder::new(self.schema, self.version).with_projection(wanted.to_vec());
        for block in &self.dictionaries {
            let bytes = read_block(&mut self.file, block)?;
            decoder
                .read_dictionary(block, &bytes)
                .map_err(arrow_error)?;
        }
        Ok(IpcBatches {
            file: self.file,
            decoder,
            blocks: self.batches.into_iter(),
        })
    }
}

/// The batches of an Arrow IPC file.
pub(super) struct IpcBatches {
    file: File,
    decoder: FileDecoder,
    blocks: std::vec::IntoIter<Block>,
}

impl Iterator for IpcBatches {
    type Item = io::Result<RecordBatch>;

    fn next(&mut self) -> Option<Self::Item> {
        let block = self.blocks.next()?;
        let batch = read_block(&mut self.file, &block).and_then(|bytes| {
            let batch = self.decoder.read_record_batch(&block, &bytes);
            batch.map_err(arrow_error)
        });
        batch.transpose()
    }
}

/// The bytes of a batch, head and body.
fn read_block(file: &mut File, block: &Block) -> io::Result<Buffer> {
    let outside = || damaged("a batch of rows lies outside the file");
    let place = |number: i64| u64::try_from(number).map_err(|_| outside());
    let start = place(block.offset())?;
    let head = place(block.metaDataLength().into())?;
    let length = place(block.bodyLength())?.checked_add(head);
    let size = file.metadata()?.len();
    let length = length
        .filter(|length| size.checked_sub(start).is_some_and(|left| *length <= left))
        .ok_or_else(outside)?;
    file.seek(SeekFrom::Start(start))?;
    let mut bytes = Vec::with_capacity(usize::try_from(length).map_err(|_| outside())?);
    file.take(length).read_to_end(&mut bytes)?;
    let (head, body) = usize::try_from(head)
        .ok()
        .and_then(|head| bytes.split_at_checked(head))
        .ok_or_else(outside)?;
    check_lengths(head, body)?;
    Ok(Buffer::from_vec(bytes))
}

/// Checks how long the columns of a batch are said to be when they are no longer compressed: 8 bytes before each.
fn check_lengths(head: &[u8], body: &[u8]) -> io::Result<()> {
    // The length of the message, 4 bytes; since format version 5 after 4 bytes of 0xff.
    let ([0xff, 0xff, 0xff, 0xff, _, _, _, _, message @ ..] | [_, _, _, _, message @ ..]) = head
    else {
        return Err(damaged("a batch of rows has no head"));
    };
    let message = root_as_message(message).map_err(|error| damaged(error.to_string()))?;
    let batch = message
        .header_as_record_batch()
        .or_else(|| message.header_as_dictionary_batch()?.data());
    let Some(batch) = batch.filter(|batch| batch.compression().is_some()) else {
        return Ok(());
    };
    for buffer in batch.buffers().into_iter().flatten() {
        let start = usize::try_from(buffer.offset()).ok();
        let prefix = start
            .and_then(|start| body.get(start..))
            .and_then(|bytes| bytes.first_chunk::<8>());
        match prefix {
            Some(prefix) if i64::from_le_bytes(*prefix) > LARGEST => {
                return Err(damaged(
                    "a column of a batch is said to be longer than 4 GiB",
                ));
            }
            None if buffer.length() > 0 => {
                return Err(damaged("a column of a batch lies outside it"));
            }
            _ => {}
        }
    }
    Ok(())
}
