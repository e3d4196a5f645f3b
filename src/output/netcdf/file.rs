//! The library that writes NetCDF-4, behind the few calls that the layout needs.

use netcdf_writer::{
    DimensionId, NcAttrValue, NcFileBuilder, NcFillValueType, NcWriteFormat, NcWriteOptions,
    NcWriteType, Result, VariableId,
};

/// zlib's level: higher ones cost time and save a hundredth.
const DEFLATE: u8 = 4;
/// Values of a chunk, about: 256 KiB of numbers, read and unpacked as a whole.
const CHUNK: u64 = 1 << 16;

/// A file in memory.
pub(super) struct NetcdfFile {
    builder: NcFileBuilder,
}

/// An attribute of a variable or of the file.
pub(super) type Attribute<'a> = (&'a str, NcAttrValue);

/// Text as an attribute.
pub(super) fn text(value: impl Into<String>) -> NcAttrValue {
    NcAttrValue::Chars(value.into())
}

/// Attributes of text, without those that are empty.
pub(super) fn texts<'a>(of: &[(&'a str, &str)]) -> Vec<Attribute<'a>> {
    let there = of.iter().filter(|(_, value)| !value.is_empty());
    there.map(|&(name, value)| (name, text(value))).collect()
}

impl NetcdfFile {
    pub(super) fn new(attributes: Vec<Attribute>) -> Result<Self> {
        let mut builder = NcFileBuilder::new();
        for (name, value) in attributes {
            builder.add_attribute(name, value)?;
        }
        Ok(Self { builder })
    }

    /// A dimension; the library has none of size 0, so one is the least.
    pub(super) fn dimension(&mut self, name: &str, size: usize) -> Result<DimensionId> {
        self.builder.add_dimension(name, size.max(1) as u64)
    }

    pub(super) fn unlimited_dimension(&mut self, name: &str) -> Result<DimensionId> {
        self.builder.add_unlimited_dimension(name)
    }

    /// A scalar that only carries attributes.
    pub(super) fn container(&mut self, name: &str, attributes: Vec<Attribute>) -> Result<()> {
        let variable = self.builder.add_variable::<i32>(name, &[])?;
        self.attributes(variable, attributes)?;
        self.builder.write_variable(variable, &[0_i32])
    }

    /// A variable without a mark for missing values.
    pub(super) fn put<T: NcWriteType>(
        &mut self,
        name: &str,
        dimensions: &[DimensionId],
        attributes: Vec<Attribute>,
        values: &[T],
    ) -> Result<()> {
        let variable = self.builder.add_variable::<T>(name, dimensions)?;
        self.attributes(variable, attributes)?;
        self.builder.write_variable(variable, values)
    }

    /// A variable with a mark for missing values.
    pub(super) fn put_with_fill<T: NcFillValueType>(
        &mut self,
        name: &str,
        dimensions: &[DimensionId],
        fill: T,
        attributes: Vec<Attribute>,
        values: &[T],
    ) -> Result<()> {
        let variable = self.builder.add_variable::<T>(name, dimensions)?;
        self.builder.set_variable_fill_value(variable, fill)?;
        self.attributes(variable, attributes)?;
        self.builder.write_variable(variable, values)
    }

    /// A variable over time and `width` places, compressed; `fill` marks missing values.
    pub(super) fn put_series<T: NcFillValueType>(
        &mut self,
        name: &str,
        [time, place]: [DimensionId; 2],
        width: usize,
        fill: Option<T>,
        attributes: Vec<Attribute>,
        values: &[T],
    ) -> Result<()> {
        let variable = self.builder.add_variable::<T>(name, &[time, place])?;
        if let Some(fill) = fill {
            self.builder.set_variable_fill_value(variable, fill)?;
        }
        self.attributes(variable, attributes)?;
        let width = width.max(1) as u64;
        let times = (values.len() as u64 / width).clamp(1, (CHUNK / width).max(1));
        let chunk = vec![times, width.min(CHUNK)];
        self.builder.set_variable_chunking(variable, chunk)?;
        let shuffle = size_of::<T>() > 1;
        self.builder
            .set_variable_deflate(variable, Some(DEFLATE), shuffle)?;
        self.builder.write_variable(variable, values)
    }

    /// Identifiers, one for each place of the dimension.
    pub(super) fn put_words(
        &mut self,
        name: &str,
        dimension: DimensionId,
        long_name: &str,
        words: &[&str],
    ) -> Result<()> {
        let longest = words.iter().map(|word| word.len()).max().unwrap_or(0);
        let length = self.dimension(&format!("{name}_strlen"), longest)?;
        let variable = self.builder.add_char_variable(name, &[dimension, length])?;
        let attributes = texts(&[("long_name", long_name), ("_Encoding", "utf-8")]);
        self.attributes(variable, attributes)?;
        self.builder.write_char_variable_strings(variable, words)
    }

    /// A long text. Attributes hold at most 64 KiB, a variable any length.
    pub(super) fn put_text(&mut self, name: &str, long_name: &str, value: &str) -> Result<()> {
        let variable = self.builder.add_string_variable(name, &[])?;
        self.attributes(variable, texts(&[("long_name", long_name)]))?;
        self.builder.write_string_variable(variable, &[value])
    }

    fn attributes(&mut self, variable: VariableId, attributes: Vec<Attribute>) -> Result<()> {
        for (name, value) in attributes {
            self.builder.add_variable_attribute(variable, name, value)?;
        }
        Ok(())
    }

    pub(super) fn into_bytes(self) -> Result<Vec<u8>> {
        let format = NcWriteFormat::Nc4;
        let (_, bytes) = self.builder.to_vec(NcWriteOptions { format })?;
        Ok(bytes)
    }
}
