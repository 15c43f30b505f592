//! Legacy VTK files (`# vtk DataFile Version …`), versions 1 to 5, ascii and binary.
//!
//! Keywords stand at the start of a line, their numbers follow. Blocks may come in any order
//! that VTK allows; field arrays may even precede the points.

use super::cells::{Cells, max_connectivity};
use super::cursor::Cursor;
use super::numbers::Kind;
use super::{Budget, Limits, ReadArray, ReadSurface, check_limit, to_points};
use crate::VtkError;
use crate::dataset::TIME_VALUE;

/// What the arrays being read belong to.
#[derive(Clone, Copy, PartialEq, Eq)]
enum Owner {
    DataSet,
    Points,
    Cells,
}

struct Parser<'a> {
    cursor: Cursor<'a>,
    limits: &'a Limits,
    budget: Budget,
    /// Offsets and connectivity apart, as since version 5.
    split_cells: bool,
    is_grid: bool,
    owner: Owner,
    /// Entries per array of the owner.
    tuples: u64,
    points: Option<Vec<[f64; 3]>>,
    cells: Option<Cells>,
    types: Option<Vec<u64>>,
    surface: ReadSurface,
}

pub(super) fn parse(
    bytes: &[u8],
    limits: &Limits,
    budget: Budget,
) -> Result<ReadSurface, VtkError> {
    let mut parser = Parser {
        cursor: Cursor::new(bytes),
        limits,
        budget,
        split_cells: false,
        is_grid: false,
        owner: Owner::DataSet,
        tuples: 0,
        points: None,
        cells: None,
        types: None,
        surface: ReadSurface::default(),
    };
    parser.head()?;
    while parser.block()? {}
    parser.finish()
}

impl<'a> Parser<'a> {
    fn head(&mut self) -> Result<(), VtkError> {
        let fault = |problem: String| VtkError::malformed("header", problem);
        let version = self.cursor.words()?;
        let version = version.get(4).copied().unwrap_or_default();
        let major = version
            .split('.')
            .next()
            .and_then(|major| major.parse::<u32>().ok());
        match major {
            Some(1..=4) => {}
            Some(5) => self.split_cells = true,
            _ => return Err(fault(format!("version {version:?} is unknown"))),
        }
        // The title is free text.
        self.cursor.line();
        let mode = self.cursor.words()?;
        self.cursor.binary = match mode.first() {
            Some(mode) if mode.eq_ignore_ascii_case("ASCII") => false,
            Some(mode) if mode.eq_ignore_ascii_case("BINARY") => true,
            _ => return Err(fault("neither ASCII nor BINARY".into())),
        };
        let dataset = self.cursor.words()?;
        match dataset.as_slice() {
            [word, kind] if word.eq_ignore_ascii_case("DATASET") => {
                self.is_grid = match kind.to_ascii_uppercase().as_str() {
                    "POLYDATA" => false,
                    "UNSTRUCTURED_GRID" => true,
                    _ => {
                        return Err(VtkError::Unsupported {
                            what: format!("the data set {kind}"),
                            mend: "save the surface as POLYDATA or UNSTRUCTURED_GRID",
                        });
                    }
                };
                Ok(())
            }
            _ => Err(fault("the DATASET line is missing".into())),
        }
    }

    /// Reads the next block; false at the end of the file.
    fn block(&mut self) -> Result<bool, VtkError> {
        let words = self.cursor.words()?;
        let Some(&keyword) = words.first() else {
            return Ok(false);
        };
        let keyword = keyword.to_ascii_uppercase();
        match keyword.as_str() {
            "POINTS" => self.points(&words)?,
            "POLYGONS" | "CELLS" => {
                let cells = self.cells(&keyword, &words)?;
                self.cells = Some(cells);
            }
            "VERTICES" | "LINES" | "TRIANGLE_STRIPS" => {
                if !self.cells(&keyword, &words)?.ends.is_empty() {
                    let kind = format!("listed under {keyword}");
                    return Err(VtkError::UnsupportedCell { cell: 0, kind });
                }
            }
            "CELL_TYPES" => {
                let count = count(&words, 1)?;
                check_limit("number of cells", count, self.limits.max_cells)?;
                self.budget.book(count)?;
                self.types = Some(self.cursor.indices(&keyword, Kind::I32, count)?);
            }
            "POINT_DATA" | "CELL_DATA" => self.tuples_of(&keyword, &words)?,
            "METADATA" => self.metadata(),
            "FIELD" => self.field(count(&words, 2)?)?,
            _ => self.attribute(&keyword, &words)?,
        }
        Ok(true)
    }

    fn points(&mut self, words: &[&str]) -> Result<(), VtkError> {
        let number = count(words, 1)?;
        let limit = self.limits.max_points.min(u32::MAX.into());
        check_limit("number of points", number, limit)?;
        let values = self.numbers("POINTS", word(words, 2)?, number.saturating_mul(3))?;
        self.points = Some(to_points(&values));
        Ok(())
    }

    fn cells(&mut self, keyword: &str, words: &[&str]) -> Result<Cells, VtkError> {
        let (first, second) = (count(words, 1)?, count(words, 2)?);
        if !self.split_cells {
            // The list holds the corner count of each cell, too.
            let limit = max_connectivity(self.limits).saturating_add(self.limits.max_cells);
            check_limit("length of the cell list", second, limit)?;
            self.budget.book(second.saturating_mul(2))?;
            let list = self.cursor.indices(keyword, Kind::I32, second)?;
            return Cells::from_counted(first, list);
        }
        // `first` counts the offsets, of which the leading zero is no cell's end.
        check_limit(
            "number of cells",
            first.saturating_sub(1),
            self.limits.max_cells,
        )?;
        check_limit(
            "number of point indices",
            second,
            max_connectivity(self.limits),
        )?;
        let mut ends = self.index_list("OFFSETS", first)?;
        let connectivity = self.index_list("CONNECTIVITY", second)?;
        if !ends.is_empty() && ends.remove(0) != 0 {
            return Err(VtkError::malformed("OFFSETS", "the first one is not 0"));
        }
        Ok(Cells {
            ends,
            connectivity,
            types: None,
        })
    }

    fn index_list(&mut self, keyword: &str, count: u64) -> Result<Vec<u64>, VtkError> {
        if count == 0 && !self.cursor.is_next(keyword) {
            return Ok(Vec::new());
        }
        let words = self.cursor.words()?;
        match words.as_slice() {
            [word, kind] if word.eq_ignore_ascii_case(keyword) => {
                let kind = Kind::from_legacy(kind).ok_or_else(|| {
                    VtkError::malformed(keyword, format!("type {kind:?} is unknown"))
                })?;
                self.budget.book(count)?;
                self.cursor.indices(keyword, kind, count)
            }
            _ => Err(VtkError::malformed(
                keyword,
                "the keyword and its type are missing",
            )),
        }
    }

    fn tuples_of(&mut self, keyword: &str, words: &[&str]) -> Result<(), VtkError> {
        let (owner, limit) = match keyword {
            "POINT_DATA" => (Owner::Points, self.limits.max_points),
            _ => (Owner::Cells, self.limits.max_cells),
        };
        self.owner = owner;
        self.tuples = count(words, 1)?;
        check_limit("number of entries per array", self.tuples, limit)
    }

    /// Information on the last array, closed by an empty line.
    fn metadata(&mut self) {
        while self
            .cursor
            .line()
            .is_some_and(|line| !line.trim_ascii().is_empty())
        {}
    }

    /// A list of arrays, each with its own size.
    fn field(&mut self, arrays: u64) -> Result<(), VtkError> {
        for _ in 0..arrays {
            let mut words = self.cursor.words()?;
            while words
                .first()
                .is_some_and(|word| word.eq_ignore_ascii_case("METADATA"))
            {
                self.metadata();
                words = self.cursor.words()?;
            }
            if words
                .first()
                .is_none_or(|word| word.eq_ignore_ascii_case("NULL_ARRAY"))
                && words.len() < 4
            {
                if words.is_empty() {
                    return Err(VtkError::malformed(
                        "FIELD",
                        "the file ends before the last array",
                    ));
                }
                continue;
            }
            let name = decode_name(word(&words, 0)?);
            let (components, tuples) = (count(&words, 1)?, count(&words, 2)?);
            self.array(name, word(&words, 3)?, components, tuples)?;
        }
        Ok(())
    }

    /// A single attribute array, or a table of colours.
    fn attribute(&mut self, keyword: &str, words: &[&str]) -> Result<(), VtkError> {
        if self.owner == Owner::DataSet {
            let problem = "this keyword is unknown before POINT_DATA and CELL_DATA";
            return Err(VtkError::malformed(format!("{keyword:.40}"), problem));
        }
        let name = decode_name(word(words, 1)?);
        let tuples = self.tuples;
        let color = if self.cursor.binary {
            "unsigned_char"
        } else {
            "float"
        };
        match keyword {
            "SCALARS" => {
                let components = if words.len() > 3 { count(words, 3)? } else { 1 };
                if self.cursor.is_next("LOOKUP_TABLE") {
                    self.cursor.words()?;
                }
                self.array(name, word(words, 2)?, components, tuples)
            }
            "VECTORS" | "NORMALS" => self.array(name, word(words, 2)?, 3, tuples),
            "TENSORS" => self.array(name, word(words, 2)?, 9, tuples),
            "TENSORS6" => self.array(name, word(words, 2)?, 6, tuples),
            "TEXTURE_COORDINATES" => self.array(name, word(words, 3)?, count(words, 2)?, tuples),
            "GLOBAL_IDS" | "PEDIGREE_IDS" | "EDGE_FLAGS" => {
                self.array(name, word(words, 2)?, 1, tuples)
            }
            "COLOR_SCALARS" => self.array(name, color, count(words, 2)?, tuples),
            "LOOKUP_TABLE" => self
                .numbers(keyword, color, count(words, 2)?.saturating_mul(4))
                .map(drop),
            _ => Err(VtkError::malformed(
                format!("{keyword:.40}"),
                "this keyword is unknown",
            )),
        }
    }

    /// Reads an array and keeps it if it belongs to the points.
    fn array(
        &mut self,
        name: String,
        kind: &str,
        components: u64,
        tuples: u64,
    ) -> Result<(), VtkError> {
        let total = components.saturating_mul(tuples);
        let skipped = match kind.to_ascii_lowercase().as_str() {
            "string" | "utf8_string" => {
                self.cursor.skip_texts(&name, total)?;
                true
            }
            "bit" if self.cursor.binary => {
                self.cursor.bytes(&name, total.div_ceil(8))?;
                true
            }
            "bit" => {
                self.numbers(&name, "int", total)?;
                true
            }
            _ => false,
        };
        if skipped {
            if self.owner == Owner::Points {
                self.surface.skipped_arrays.push(name);
            }
            return Ok(());
        }
        let values = self.numbers(&name, kind, total)?;
        match self.owner {
            Owner::Points => {
                if components == 0 || tuples != self.tuples {
                    let problem = format!(
                        "{tuples} entries of {components} numbers, for {} points",
                        self.tuples
                    );
                    return Err(VtkError::malformed(name, problem));
                }
                let components = components as usize;
                self.surface.point_data.push(ReadArray {
                    name,
                    components,
                    values,
                });
            }
            Owner::DataSet if name == TIME_VALUE && values.len() == 1 => {
                self.surface.time = values.first().copied();
            }
            _ => {}
        }
        Ok(())
    }

    fn numbers(&mut self, name: &str, kind: &str, count: u64) -> Result<Vec<f64>, VtkError> {
        let kind = Kind::from_legacy(kind)
            .ok_or_else(|| VtkError::malformed(name, format!("type {kind:?} is unknown")))?;
        self.budget.book(count)?;
        self.cursor.floats(name, kind, count)
    }

    fn finish(self) -> Result<ReadSurface, VtkError> {
        let Self {
            mut surface,
            points,
            cells,
            types,
            limits,
            is_grid,
            ..
        } = self;
        surface.points =
            points.ok_or_else(|| VtkError::malformed("POINTS", "the block is missing"))?;
        match cells {
            Some(mut cells) => {
                if is_grid {
                    let missing = || VtkError::malformed("CELL_TYPES", "the block is missing");
                    cells.types = Some(types.ok_or_else(missing)?);
                }
                surface.triangles = cells.triangulate(surface.points.len(), limits)?;
            }
            None if surface.points.is_empty() => {}
            // A bare cloud of points, or a file cut off behind them.
            None => {
                return Err(VtkError::malformed(
                    "POLYGONS or CELLS",
                    "the block is missing",
                ));
            }
        }
        for array in &surface.point_data {
            if array.values.len() != array.components.saturating_mul(surface.points.len()) {
                return Err(VtkError::ArrayLength {
                    name: array.name.clone(),
                    per: "point",
                    expected: surface.points.len(),
                    found: array.values.len() / array.components.max(1),
                });
            }
        }
        Ok(surface)
    }
}

fn word<'w>(words: &[&'w str], index: usize) -> Result<&'w str, VtkError> {
    words.get(index).copied().ok_or_else(|| {
        let start = words.first().copied().unwrap_or_default();
        VtkError::malformed(
            format!("{start:.40}"),
            format!("word {} of the line is missing", index + 1),
        )
    })
}

fn count(words: &[&str], index: usize) -> Result<u64, VtkError> {
    let text = word(words, index)?;
    text.parse().map_err(|_| {
        let start = words.first().copied().unwrap_or_default();
        VtkError::malformed(format!("{start:.40}"), format!("{text:.40} is no count"))
    })
}

/// A name with blanks and other special characters written as `%20` and so on.
fn decode_name(name: &str) -> String {
    let mut bytes = Vec::with_capacity(name.len());
    let mut rest = name.as_bytes();
    while let Some((&byte, tail)) = rest.split_first() {
        let code = (byte == b'%')
            .then(|| tail.get(..2))
            .flatten()
            .and_then(|digits| std::str::from_utf8(digits).ok())
            .and_then(|digits| u8::from_str_radix(digits, 16).ok());
        match code {
            Some(code) => {
                bytes.push(code);
                rest = &tail[2..];
            }
            None => {
                bytes.push(byte);
                rest = tail;
            }
        }
    }
    String::from_utf8_lossy(&bytes).into_owned()
}
