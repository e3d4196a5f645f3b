//! Columns of the series, of the polygons that stand at each time.

use std::sync::Arc;

use arrow_array::types::Int32Type;
use arrow_array::{
    ArrayRef, BooleanArray, DictionaryArray, Float32Array, Float64Array, Int32Array,
    TimestampMicrosecondArray, UInt8Array,
};
use arrow_buffer::NullBuffer;
use arrow_schema::ArrowError;

use crate::integral::EstimateBlock;

/// The rows of a block: cells of polygons that stand, by time, then polygon.
pub(super) struct StandingRows<'a> {
    block: &'a EstimateBlock,
    /// Cell and number of the polygon in the block.
    rows: Vec<(usize, usize)>,
    /// Rows with a value.
    there: NullBuffer,
}

impl<'a> StandingRows<'a> {
    pub(super) fn new(block: &'a EstimateBlock) -> Self {
        let n = block.times.len();
        let polygons = block.flag.len() / n.max(1);
        let rows: Vec<(usize, usize)> = (0..n)
            .flat_map(|t| (0..polygons).map(move |p| (p * n + t, p)))
            .filter(|&(cell, _)| block.stands(cell))
            .collect();
        let there = rows.iter().map(|&(cell, _)| block.flag[cell].is_usable());
        Self {
            there: there.collect::<Vec<bool>>().into(),
            block,
            rows,
        }
    }

    pub(super) fn len(&self) -> usize {
        self.rows.len()
    }

    pub(super) fn times(&self) -> ArrayRef {
        let n = self.block.times.len().max(1);
        let times = self.rows.iter();
        let times = times.map(|&(cell, _)| self.block.times[cell % n].micros());
        Arc::new(TimestampMicrosecondArray::from_iter_values(times).with_timezone("UTC"))
    }

    /// Words by their place in `names`.
    pub(super) fn named(
        &self,
        of: impl Fn(usize, usize) -> Option<usize>,
        names: &ArrayRef,
    ) -> Result<ArrayRef, ArrowError> {
        let keys = self.rows.iter().map(|&(cell, p)| of(cell, p));
        let keys: Int32Array = keys
            .map(|key| key.and_then(|key| i32::try_from(key).ok()))
            .collect();
        let array = DictionaryArray::<Int32Type>::try_new(keys, Arc::clone(names))?;
        Ok(Arc::new(array))
    }

    /// Numbers that every row has.
    pub(super) fn given(&self, of: impl Fn(usize, usize) -> f64) -> ArrayRef {
        let numbers = self.rows.iter().map(|&(cell, p)| of(cell, p));
        Arc::new(Float64Array::from_iter_values(numbers))
    }

    /// Numbers of the rows with a value.
    pub(super) fn values(&self, of: impl Fn(usize, usize) -> f64) -> ArrayRef {
        let values: Vec<f64> = self.rows.iter().map(|&(cell, p)| of(cell, p)).collect();
        Arc::new(Float64Array::new(values.into(), Some(self.there.clone())))
    }

    /// A part of an error.
    pub(super) fn part(&self, column: &[f64]) -> ArrayRef {
        #[expect(
            clippy::cast_possible_truncation,
            reason = "seven digits are enough for a part of an error"
        )]
        self.singles(|cell| column[cell] as f32)
    }

    pub(super) fn ages(&self) -> ArrayRef {
        self.singles(|cell| self.block.age[cell])
    }

    fn singles(&self, of: impl Fn(usize) -> f32) -> ArrayRef {
        let values: Vec<f32> = self.rows.iter().map(|&(cell, _)| of(cell)).collect();
        Arc::new(Float32Array::new(values.into(), Some(self.there.clone())))
    }

    pub(super) fn flags(&self) -> ArrayRef {
        let flags = self
            .rows
            .iter()
            .map(|&(cell, _)| self.block.flag[cell].value());
        Arc::new(UInt8Array::from_iter_values(flags))
    }

    pub(super) fn called(&self, column: &[bool]) -> ArrayRef {
        let values: Vec<bool> = self.rows.iter().map(|&(cell, _)| column[cell]).collect();
        Arc::new(BooleanArray::new(values.into(), Some(self.there.clone())))
    }
}
