//! One frame of a surface: borrowed views for writing, owned copies for the background.
//!
//! A frame borrows the caller's slices, so writing copies nothing but the encoded bytes.
//! [`OwnedFrame`] is the same with its own memory, for handing over to another thread.

use crate::VtkError;

/// Precision of floating-point point and cell arrays. Coordinates are always `Float64`.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub enum Precision {
    /// `Float32`, about 7 digits: enough for looking at a field, half the size.
    #[default]
    Single,
    /// `Float64`, every bit of the values: for further computation.
    Double,
}

/// How the arrays in a file are compressed.
///
/// Cost of a frame with 12 scalar and 2 vector point arrays and 3 cell arrays on an irregular
/// mesh, including the flush to the disk (`examples/frame_cost.rs`, one core at 2.8 GHz):
///
/// | points | fields | none | LZ4 | zlib |
/// |-|-|-|-|-|
/// | 10 000 | single | 0.004 s, 2.1 MB | 0.005 s, 1.9 MB | 0.03 s, 1.6 MB |
/// | 10 000 | double | 0.006 s, 3.3 MB | 0.007 s, 3.2 MB | 0.06 s, 2.9 MB |
/// | 160 000 | single | 0.06 s, 33 MB | 0.08 s, 31 MB | 0.6 s, 26 MB |
/// | 160 000 | double | 0.12 s, 53 MB | 0.16 s, 51 MB | 1.5 s, 46 MB |
///
/// Fields with repeated values (uniform, zero, or on a regular grid) shrink two to three times.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub enum Compression {
    /// Not at all: largest, but read by every program.
    None,
    /// LZ4: hardly slower than none; read by VTK, but not by every other program.
    Lz4,
    /// zlib: the smallest, and read by most programs.
    #[default]
    Zlib,
}

/// Values of an array, one entry per point or per cell.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Values<'a> {
    /// One number per entry; NaN marks "no value here".
    Scalar(&'a [f64]),
    /// Three components per entry.
    Vector(&'a [[f64; 3]]),
    /// One whole number per entry, stored as `Int64`.
    Integer(&'a [i64]),
}

impl Values<'_> {
    /// Number of entries.
    pub fn len(&self) -> usize {
        match self {
            Self::Scalar(values) => values.len(),
            Self::Vector(values) => values.len(),
            Self::Integer(values) => values.len(),
        }
    }

    /// Whether there are no entries.
    pub fn is_empty(&self) -> bool {
        self.len() == 0
    }
}

/// A named array. The unit belongs into the name: `speed [um/s]`.
#[derive(Clone, Debug, PartialEq)]
pub struct Array<'a> {
    /// Name shown by viewers; unique among the point (or cell) arrays of a frame.
    pub name: String,
    /// The values.
    pub values: Values<'a>,
}

impl<'a> Array<'a> {
    /// A scalar array.
    pub fn scalar(name: impl Into<String>, values: &'a [f64]) -> Self {
        Self {
            name: name.into(),
            values: Values::Scalar(values),
        }
    }

    /// A vector array.
    pub fn vector(name: impl Into<String>, values: &'a [[f64; 3]]) -> Self {
        Self {
            name: name.into(),
            values: Values::Vector(values),
        }
    }

    /// An array of whole numbers.
    pub fn integer(name: impl Into<String>, values: &'a [i64]) -> Self {
        Self {
            name: name.into(),
            values: Values::Integer(values),
        }
    }
}

/// A text stored with the frame as a whole, such as the version of the program.
///
/// VTK's own form of texts; some readers that are not built on VTK refuse files that hold any.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct FieldText {
    /// Name of the entry.
    pub name: String,
    /// Its text; anything but NUL characters.
    pub text: String,
}

/// A triangulated surface with its fields at one instant.
///
/// # Shapes and units
/// `points`: \[n_points\], one unit of length for all; `triangles`: \[n_cells\], indices into
/// `points`, counter-clockwise seen from outside; point arrays have n_points entries, cell
/// arrays n_cells. `time` in seconds.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct Frame<'a> {
    /// Positions; written in double precision, and finite.
    pub points: &'a [[f64; 3]],
    /// Corner indices of each triangle.
    pub triangles: &'a [[u32; 3]],
    /// Physical time, s; stored as the field array `TimeValue` when given.
    pub time: Option<f64>,
    /// Arrays with one entry per point.
    pub point_data: Vec<Array<'a>>,
    /// Arrays with one entry per triangle.
    pub cell_data: Vec<Array<'a>>,
    /// Texts that describe the frame as a whole.
    pub field_data: Vec<FieldText>,
    /// Precision of the floating-point arrays.
    pub precision: Precision,
}

/// Name of the field array that holds the time, as VTK's own readers know it.
pub(crate) const TIME_VALUE: &str = "TimeValue";

impl Frame<'_> {
    /// Checks that the frame can be written without loss.
    ///
    /// # Errors
    /// `NonFinitePoint`, `PointIndex`, `NonFiniteTime`, `ArrayLength`, `SinglePrecisionRange`,
    /// or `Text` for an empty, repeated or unstorable name.
    pub fn validate(&self) -> Result<(), VtkError> {
        for (index, &position) in self.points.iter().enumerate() {
            if !position.iter().all(|x| x.is_finite()) {
                return Err(VtkError::NonFinitePoint { index, position });
            }
        }
        let points = self.points.len();
        for (cell, triangle) in self.triangles.iter().enumerate() {
            if let Some(&point) = triangle.iter().find(|&&point| point as usize >= points) {
                return Err(VtkError::PointIndex {
                    cell,
                    point: point.into(),
                    points,
                });
            }
        }
        if let Some(time) = self.time
            && !time.is_finite()
        {
            return Err(VtkError::NonFiniteTime { time });
        }
        self.validate_arrays(&self.point_data, "point", points)?;
        self.validate_arrays(&self.cell_data, "cell", self.triangles.len())?;
        let mut names = vec![TIME_VALUE];
        for field in &self.field_data {
            validate_name(&field.name, &mut names)?;
            if field.text.contains('\0') {
                return Err(VtkError::Text {
                    text: field.text.clone(),
                    problem: "holds a NUL character, which ends a text in VTK",
                });
            }
        }
        Ok(())
    }

    fn validate_arrays(
        &self,
        arrays: &[Array<'_>],
        per: &'static str,
        expected: usize,
    ) -> Result<(), VtkError> {
        let mut names = Vec::new();
        for array in arrays {
            validate_name(&array.name, &mut names)?;
            let found = array.values.len();
            if found != expected {
                return Err(VtkError::ArrayLength {
                    name: array.name.clone(),
                    per,
                    expected,
                    found,
                });
            }
            if self.precision == Precision::Single
                && let Some((index, value)) = beyond_single(&array.values)
            {
                return Err(VtkError::SinglePrecisionRange {
                    name: array.name.clone(),
                    index,
                    value,
                });
            }
        }
        Ok(())
    }
}

/// First finite value that would become infinite in single precision, with its entry.
fn beyond_single(values: &Values<'_>) -> Option<(usize, f64)> {
    let overflows = |x: f64| x.is_finite() && !(x as f32).is_finite();
    match values {
        Values::Scalar(values) => values
            .iter()
            .position(|&x| overflows(x))
            .map(|i| (i, values[i])),
        Values::Vector(values) => values
            .iter()
            .enumerate()
            .find_map(|(i, v)| v.iter().find(|&&x| overflows(x)).map(|&x| (i, x))),
        Values::Integer(_) => None,
    }
}

/// Checks a name against those already used, and adds it to them.
fn validate_name<'n>(name: &'n str, used: &mut Vec<&'n str>) -> Result<(), VtkError> {
    let refuse = |problem| {
        Err(VtkError::Text {
            text: name.to_owned(),
            problem,
        })
    };
    if name.is_empty() {
        return refuse("is empty: every array needs a name");
    }
    if name
        .chars()
        .any(|c| c.is_control() || matches!(c, '\u{fffe}' | '\u{ffff}'))
    {
        return refuse("holds a character that XML cannot carry in a name");
    }
    if used.contains(&name) {
        return refuse("is used twice; names must differ");
    }
    used.push(name);
    Ok(())
}

/// Values of an array with their own memory; see [`Values`].
#[derive(Clone, Debug, PartialEq)]
pub enum OwnedValues {
    /// One number per entry.
    Scalar(Vec<f64>),
    /// Three components per entry.
    Vector(Vec<[f64; 3]>),
    /// One whole number per entry.
    Integer(Vec<i64>),
}

/// A named array with its own memory; see [`Array`].
#[derive(Clone, Debug, PartialEq)]
pub struct OwnedArray {
    /// Name shown by viewers.
    pub name: String,
    /// The values.
    pub values: OwnedValues,
}

impl OwnedArray {
    fn borrow(&self) -> Array<'_> {
        Array {
            name: self.name.clone(),
            values: match &self.values {
                OwnedValues::Scalar(values) => Values::Scalar(values),
                OwnedValues::Vector(values) => Values::Vector(values),
                OwnedValues::Integer(values) => Values::Integer(values),
            },
        }
    }
}

/// A frame of a time series with its own memory; see [`Frame`].
#[derive(Clone, Debug, Default, PartialEq)]
pub struct OwnedFrame {
    /// File name relative to the folder of the collection file, such as
    /// [`frame_file_name`](crate::frame_file_name) makes.
    pub file_name: String,
    /// Physical time, s.
    pub time: f64,
    /// Positions.
    pub points: Vec<[f64; 3]>,
    /// Corner indices of each triangle.
    pub triangles: Vec<[u32; 3]>,
    /// Arrays with one entry per point.
    pub point_data: Vec<OwnedArray>,
    /// Arrays with one entry per triangle.
    pub cell_data: Vec<OwnedArray>,
    /// Texts that describe the frame as a whole.
    pub field_data: Vec<FieldText>,
    /// Precision of the floating-point arrays.
    pub precision: Precision,
}

impl OwnedFrame {
    /// The frame as a borrowed view, ready for [`write_vtu`](crate::write_vtu).
    pub fn borrow(&self) -> Frame<'_> {
        Frame {
            points: &self.points,
            triangles: &self.triangles,
            time: Some(self.time),
            point_data: self.point_data.iter().map(OwnedArray::borrow).collect(),
            cell_data: self.cell_data.iter().map(OwnedArray::borrow).collect(),
            field_data: self.field_data.clone(),
            precision: self.precision,
        }
    }
}
