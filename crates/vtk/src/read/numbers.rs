//! Numbers as VTK stores them.

use crate::VtkError;

/// Scalar type of an array.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum Kind {
    I8,
    U8,
    I16,
    U16,
    I32,
    U32,
    I64,
    U64,
    F32,
    F64,
}

/// Order of the bytes in a number.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum Order {
    Little,
    Big,
}

impl Kind {
    /// The type by its name in XML files.
    pub fn from_xml(name: &str) -> Option<Self> {
        Some(match name {
            "Int8" => Self::I8,
            "UInt8" => Self::U8,
            "Int16" => Self::I16,
            "UInt16" => Self::U16,
            "Int32" => Self::I32,
            "UInt32" => Self::U32,
            "Int64" => Self::I64,
            "UInt64" => Self::U64,
            "Float32" => Self::F32,
            "Float64" => Self::F64,
            _ => return None,
        })
    }

    /// The type by its name in legacy files; sizes as on 64-bit Unix, where they differ.
    pub fn from_legacy(name: &str) -> Option<Self> {
        Some(match name.to_ascii_lowercase().as_str() {
            "char" | "signed_char" => Self::I8,
            "unsigned_char" => Self::U8,
            "short" => Self::I16,
            "unsigned_short" => Self::U16,
            // VTK stores its index type as `int` in legacy files.
            "int" | "vtkidtype" => Self::I32,
            "unsigned_int" => Self::U32,
            "long" | "long_long" | "vtktypeint64" => Self::I64,
            "unsigned_long" | "unsigned_long_long" | "vtktypeuint64" => Self::U64,
            "float" => Self::F32,
            "double" => Self::F64,
            _ => return None,
        })
    }

    /// Bytes per number.
    pub fn size(self) -> usize {
        match self {
            Self::I8 | Self::U8 => 1,
            Self::I16 | Self::U16 => 2,
            Self::I32 | Self::U32 | Self::F32 => 4,
            Self::I64 | Self::U64 | Self::F64 => 8,
        }
    }

    /// Numbers from bytes; a rest shorter than a number is ignored.
    pub fn floats(self, bytes: &[u8], order: Order) -> Vec<f64> {
        match self {
            Self::I8 => bytes.iter().map(|&x| f64::from(x as i8)).collect(),
            Self::U8 => bytes.iter().map(|&x| f64::from(x)).collect(),
            Self::I16 => map(bytes, order, |x| i16::from_le_bytes(x).into()),
            Self::U16 => map(bytes, order, |x| u16::from_le_bytes(x).into()),
            Self::I32 => map(bytes, order, |x| i32::from_le_bytes(x).into()),
            Self::U32 => map(bytes, order, |x| u32::from_le_bytes(x).into()),
            Self::I64 => map(bytes, order, |x| i64::from_le_bytes(x) as f64),
            Self::U64 => map(bytes, order, |x| u64::from_le_bytes(x) as f64),
            Self::F32 => map(bytes, order, |x| f32::from_le_bytes(x).into()),
            Self::F64 => map(bytes, order, f64::from_le_bytes),
        }
    }

    /// Whole, non-negative numbers from bytes; `None` if the type is floating-point.
    /// A negative number becomes a huge one, which no list can hold.
    pub fn indices(self, bytes: &[u8], order: Order) -> Option<Vec<u64>> {
        Some(match self {
            Self::I8 => bytes.iter().map(|&x| x as i8 as u64).collect(),
            Self::U8 => bytes.iter().map(|&x| x.into()).collect(),
            Self::I16 => map(bytes, order, |x| i16::from_le_bytes(x) as u64),
            Self::U16 => map(bytes, order, |x| u16::from_le_bytes(x).into()),
            Self::I32 => map(bytes, order, |x| i32::from_le_bytes(x) as u64),
            Self::U32 => map(bytes, order, |x| u32::from_le_bytes(x).into()),
            Self::I64 => map(bytes, order, |x| i64::from_le_bytes(x) as u64),
            Self::U64 => map(bytes, order, u64::from_le_bytes),
            Self::F32 | Self::F64 => return None,
        })
    }
}

/// Converts each group of `N` bytes, handed over as little-endian.
fn map<const N: usize, T>(bytes: &[u8], order: Order, convert: impl Fn([u8; N]) -> T) -> Vec<T> {
    let groups = bytes.as_chunks::<N>().0.iter().copied();
    match order {
        Order::Little => groups.map(convert).collect(),
        Order::Big => groups
            .map(|mut group| {
                group.reverse();
                convert(group)
            })
            .collect(),
    }
}

/// Numbers in text, exactly `count` of them, separated by white space.
pub(super) fn parse_text<T: std::str::FromStr>(
    name: &str,
    text: &str,
    count: usize,
) -> Result<Vec<T>, VtkError> {
    // A number takes a digit and a blank, so the text bounds what may be allocated.
    let mut values = Vec::with_capacity(count.min(text.len() / 2 + 1));
    for word in text.split_ascii_whitespace() {
        if values.len() == count {
            return Err(VtkError::malformed(
                name,
                format!("more than {count} numbers"),
            ));
        }
        let value = word.parse().map_err(|_| {
            VtkError::malformed(name, format!("{word:.40} is not a fitting number"))
        })?;
        values.push(value);
    }
    if values.len() != count {
        let problem = format!("{} numbers instead of {count}", values.len());
        return Err(VtkError::malformed(name, problem));
    }
    Ok(values)
}
