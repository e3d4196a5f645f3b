//! Values of a column, whatever its type.

use arrow_array::cast::AsArray;
use arrow_array::types::{
    ArrowPrimitiveType, Date32Type, Date64Type, Float16Type, Float32Type, Float64Type, Int8Type,
    Int16Type, Int32Type, Int64Type, Time32MillisecondType, Time32SecondType,
    Time64MicrosecondType, Time64NanosecondType, TimestampMicrosecondType,
    TimestampMillisecondType, TimestampNanosecondType, TimestampSecondType, UInt8Type, UInt16Type,
    UInt32Type, UInt64Type,
};
use arrow_array::{Array, ArrayAccessor, ArrayRef};
use arrow_schema::{DataType, TimeUnit};

/// What the values of a column are.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum Kind {
    /// All are missing.
    Nothing,
    Text,
    Integer,
    Number,
    /// Since 1970-01-01T00:00:00Z.
    Instant(TimeUnit),
    /// Since 1970-01-01T00:00:00 of a local clock.
    Local(TimeUnit),
    /// Days since 1970-01-01.
    Day,
    /// A day as milliseconds since 1970-01-01.
    DayInMilliseconds,
    /// Since midnight.
    Clock(TimeUnit),
}

impl Kind {
    /// The kind of a column type; `None` for one that holds nothing a report could use.
    pub(super) fn of(data: &DataType) -> Option<Self> {
        Some(match data {
            DataType::Null => Self::Nothing,
            DataType::Utf8
            | DataType::LargeUtf8
            | DataType::Utf8View
            | DataType::Binary
            | DataType::LargeBinary
            | DataType::BinaryView => Self::Text,
            DataType::Float16 | DataType::Float32 | DataType::Float64 => Self::Number,
            integer if integer.is_integer() => Self::Integer,
            DataType::Timestamp(unit, Some(_)) => Self::Instant(*unit),
            DataType::Timestamp(unit, None) => Self::Local(*unit),
            DataType::Date32 => Self::Day,
            DataType::Date64 => Self::DayInMilliseconds,
            DataType::Time32(unit) | DataType::Time64(unit) => Self::Clock(*unit),
            DataType::Dictionary(_, values) => match Self::of(values)? {
                kind @ (Self::Nothing | Self::Text | Self::Integer | Self::Number) => kind,
                _ => return None,
            },
            _ => return None,
        })
    }
}

/// A value.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) enum Cell<'t> {
    Missing,
    Number(f64),
    Integer(i128),
    /// Without white space around it.
    Text(&'t [u8]),
}

impl Cell<'_> {
    /// Writes the value as a text table has it.
    pub(super) fn append_to(self, text: &mut Vec<u8>) {
        match self {
            Self::Missing => {}
            Self::Number(number) => text.extend_from_slice(number.to_string().as_bytes()),
            Self::Integer(integer) => text.extend_from_slice(integer.to_string().as_bytes()),
            Self::Text(own) => text.extend_from_slice(own),
        }
    }
}

/// The values of a column in one batch of rows.
pub(super) enum Cells<'b> {
    Nothing,
    /// Missing ones are NaN.
    Numbers(Vec<f64>),
    Integers(Vec<Option<i128>>),
    Text(Vec<Option<&'b [u8]>>),
    /// Values and which of them each row has.
    Dictionary(Vec<Option<usize>>, Box<Cells<'b>>),
}

impl<'b> Cells<'b> {
    /// The values of a column of a type that has a [`Kind`].
    pub(super) fn new(column: &'b ArrayRef) -> Self {
        match column.data_type() {
            DataType::Utf8 => texts(column.as_string_opt::<i32>(), str::as_bytes),
            DataType::LargeUtf8 => texts(column.as_string_opt::<i64>(), str::as_bytes),
            DataType::Utf8View => texts(column.as_string_view_opt(), str::as_bytes),
            DataType::Binary => texts(column.as_binary_opt::<i32>(), |bytes| bytes),
            DataType::LargeBinary => texts(column.as_binary_opt::<i64>(), |bytes| bytes),
            DataType::BinaryView => texts(column.as_binary_view_opt(), |bytes| bytes),
            DataType::Float16 => {
                numbers::<Float16Type>(column, <Float16Type as ArrowPrimitiveType>::Native::to_f64)
            }
            DataType::Float32 => numbers::<Float32Type>(column, f64::from),
            DataType::Float64 => numbers::<Float64Type>(column, |x| x),
            DataType::Int8 => integers::<Int8Type>(column),
            DataType::Int16 => integers::<Int16Type>(column),
            DataType::Int32 => integers::<Int32Type>(column),
            DataType::Int64 => integers::<Int64Type>(column),
            DataType::UInt8 => integers::<UInt8Type>(column),
            DataType::UInt16 => integers::<UInt16Type>(column),
            DataType::UInt32 => integers::<UInt32Type>(column),
            DataType::UInt64 => integers::<UInt64Type>(column),
            DataType::Date32 => integers::<Date32Type>(column),
            DataType::Date64 => integers::<Date64Type>(column),
            DataType::Time32(TimeUnit::Second) => integers::<Time32SecondType>(column),
            DataType::Time32(_) => integers::<Time32MillisecondType>(column),
            DataType::Time64(TimeUnit::Nanosecond) => integers::<Time64NanosecondType>(column),
            DataType::Time64(_) => integers::<Time64MicrosecondType>(column),
            DataType::Timestamp(unit, _) => match unit {
                TimeUnit::Second => integers::<TimestampSecondType>(column),
                TimeUnit::Millisecond => integers::<TimestampMillisecondType>(column),
                TimeUnit::Microsecond => integers::<TimestampMicrosecondType>(column),
                TimeUnit::Nanosecond => integers::<TimestampNanosecondType>(column),
            },
            DataType::Dictionary(..) => match column.as_any_dictionary_opt() {
                // The keys of a dictionary without values may not be asked for.
                Some(dictionary) if !dictionary.values().is_empty() => {
                    let keys = (0..).zip(dictionary.normalized_keys());
                    let keys =
                        keys.map(|(row, key)| dictionary.keys().is_valid(row).then_some(key));
                    Self::Dictionary(keys.collect(), Box::new(Self::new(dictionary.values())))
                }
                _ => Self::Nothing,
            },
            _ => Self::Nothing,
        }
    }

    /// The value of a row.
    pub(super) fn at(&self, row: usize) -> Cell<'b> {
        match self {
            Self::Nothing => Cell::Missing,
            Self::Numbers(values) => match values.get(row) {
                Some(&number) if !number.is_nan() => Cell::Number(number),
                _ => Cell::Missing,
            },
            Self::Integers(values) => {
                let value = values.get(row).copied().flatten();
                value.map_or(Cell::Missing, Cell::Integer)
            }
            Self::Text(values) => {
                let value = values.get(row).copied().flatten();
                value.map_or(Cell::Missing, |text| Cell::Text(text.trim_ascii()))
            }
            Self::Dictionary(_, values) => self
                .key(row)
                .map_or(Cell::Missing, |value| values.at(value)),
        }
    }

    /// Which value of a dictionary a row has.
    pub(super) fn key(&self, row: usize) -> Option<usize> {
        match self {
            Self::Dictionary(keys, _) => keys.get(row).copied().flatten(),
            _ => None,
        }
    }

    /// How many values the dictionary has; 0 where there is none.
    pub(super) fn dictionary_len(&self) -> usize {
        match self {
            Self::Dictionary(_, values) => match values.as_ref() {
                Self::Nothing | Self::Dictionary(..) => 0,
                Self::Numbers(values) => values.len(),
                Self::Integers(values) => values.len(),
                Self::Text(values) => values.len(),
            },
            _ => 0,
        }
    }
}

fn numbers<'b, T: ArrowPrimitiveType>(
    column: &ArrayRef,
    convert: impl Fn(T::Native) -> f64,
) -> Cells<'b> {
    let values = column.as_primitive_opt::<T>().into_iter().flatten();
    Cells::Numbers(values.map(|v| v.map_or(f64::NAN, &convert)).collect())
}

fn integers<'b, T: ArrowPrimitiveType<Native: Into<i128>>>(column: &ArrayRef) -> Cells<'b> {
    let values = column.as_primitive_opt::<T>().into_iter().flatten();
    Cells::Integers(values.map(|v| v.map(Into::into)).collect())
}

/// Texts of any kind of text column.
fn texts<'b, V: 'b + ?Sized, A: ArrayAccessor<Item = &'b V>>(
    column: Option<A>,
    bytes: impl Fn(&'b V) -> &'b [u8],
) -> Cells<'b> {
    let Some(column) = column else {
        return Cells::Nothing;
    };
    let values = (0..column.len()).map(|k| column.is_valid(k).then(|| bytes(column.value(k))));
    Cells::Text(values.collect())
}
