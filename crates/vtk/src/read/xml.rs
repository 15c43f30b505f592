//! VTU and VTP files (XML).
//!
//! One pass over the XML collects the arrays' attributes and borrows their text; then only the
//! arrays a surface needs are decoded. Raw appended data are no XML, so the text is cut before
//! them.

use quick_xml::Reader;
use quick_xml::events::{BytesStart, Event};
use std::borrow::Cow;

use super::cells::{Cells, max_connectivity};
use super::numbers::{Kind, Order, parse_text};
use super::payload::{Compressor, Layout, Source, decode};
use super::{Budget, Limits, ReadArray, ReadSurface, attribute, check_limit, to_points, xml_error};
use crate::VtkError;
use crate::dataset::TIME_VALUE;

/// More arrays or deeper nesting than any real file has.
const MAX_ARRAYS: u64 = 4096;
const MAX_DEPTH: u64 = 64;

/// A `DataArray` as it stands in the file.
struct Node<'a> {
    /// Element around it: `PointData`, `Points`, `Polys`, …
    section: String,
    name: String,
    /// Both, for messages.
    place: String,
    /// `None` for texts and bits.
    kind: Option<Kind>,
    components: u64,
    tuples: Option<u64>,
    format: Format,
    text: Cow<'a, str>,
}

enum Format {
    Ascii,
    Inline,
    Appended(u64),
}

/// Everything before the arrays are decoded.
struct Document<'a> {
    is_grid: bool,
    layout: Layout,
    counts: Counts,
    nodes: Vec<Node<'a>>,
    appended: Option<Source<'a>>,
}

/// Attributes of the `Piece`.
struct Counts {
    points: u64,
    cells: u64,
}

pub(super) fn parse(
    bytes: &[u8],
    limits: &Limits,
    mut budget: Budget,
) -> Result<ReadSurface, VtkError> {
    let document = scan(bytes)?;
    let Counts { points, cells } = document.counts;
    check_limit(
        "number of points",
        points,
        limits.max_points.min(u32::MAX.into()),
    )?;
    check_limit("number of cells", cells, limits.max_cells)?;

    let coordinates = document.node("Points", None)?;
    if coordinates.components != 3 {
        let problem = format!("{} components instead of 3", coordinates.components);
        return Err(VtkError::malformed("Points", problem));
    }
    let coordinates = document.floats(coordinates, points, &mut budget)?;

    let section = if document.is_grid { "Cells" } else { "Polys" };
    let mut triangles = Vec::new();
    if cells > 0 {
        let ends =
            document.indices(document.node(section, Some("offsets"))?, cells, &mut budget)?;
        let corners = ends.last().copied().unwrap_or(0);
        check_limit("number of point indices", corners, max_connectivity(limits))?;
        let connectivity = document.node(section, Some("connectivity"))?;
        let connectivity = document.indices(connectivity, corners, &mut budget)?;
        let types = if document.is_grid {
            let types = document.node(section, Some("types"))?;
            Some(document.indices(types, cells, &mut budget)?)
        } else {
            None
        };
        let list = Cells {
            ends,
            connectivity,
            types,
        };
        triangles = list.triangulate(points as usize, limits)?;
    }

    let mut surface = ReadSurface {
        points: to_points(&coordinates),
        triangles,
        ..ReadSurface::default()
    };
    for node in document.nodes.iter().filter(|n| n.section == "PointData") {
        if node.kind.is_none() {
            surface.skipped_arrays.push(node.name.clone());
            continue;
        }
        surface.point_data.push(ReadArray {
            name: node.name.clone(),
            components: node.components as usize,
            values: document.floats(node, points, &mut budget)?,
        });
    }
    if let Some(node) = document
        .nodes
        .iter()
        .find(|n| n.section == "FieldData" && n.name == TIME_VALUE)
        && (node.tuples, node.components) == (Some(1), 1)
    {
        surface.time = document.floats(node, 1, &mut budget)?.first().copied();
    }
    Ok(surface)
}

impl<'a> Document<'a> {
    fn node(&self, section: &str, name: Option<&str>) -> Result<&Node<'a>, VtkError> {
        self.nodes
            .iter()
            .find(|node| node.section == section && name.is_none_or(|name| node.name == name))
            .ok_or_else(|| {
                let name = name.unwrap_or("coordinates");
                VtkError::malformed(section, format!("the array of {name} is missing"))
            })
    }

    fn floats(
        &self,
        node: &Node<'_>,
        tuples: u64,
        budget: &mut Budget,
    ) -> Result<Vec<f64>, VtkError> {
        let (kind, count) = self.prepare(node, tuples, budget)?;
        if matches!(node.format, Format::Ascii) {
            return parse_text(&node.place, &node.text, count as usize);
        }
        let (bytes, order) = (self.bytes(node, kind, count), self.layout.order);
        Ok(kind.floats(&bytes?, order))
    }

    fn indices(
        &self,
        node: &Node<'_>,
        tuples: u64,
        budget: &mut Budget,
    ) -> Result<Vec<u64>, VtkError> {
        let (kind, count) = self.prepare(node, tuples, budget)?;
        if matches!(node.format, Format::Ascii) {
            return parse_text(&node.place, &node.text, count as usize);
        }
        let bytes = self.bytes(node, kind, count)?;
        kind.indices(&bytes, self.layout.order)
            .ok_or_else(|| VtkError::malformed(&node.place, "whole numbers are needed here"))
    }

    /// Type and number of values, which are booked on the budget.
    fn prepare(
        &self,
        node: &Node<'_>,
        tuples: u64,
        budget: &mut Budget,
    ) -> Result<(Kind, u64), VtkError> {
        let kind = node.kind.ok_or_else(|| {
            VtkError::malformed(&node.place, "numbers of a known type are needed here")
        })?;
        let count = tuples.saturating_mul(node.components);
        budget.book(count)?;
        Ok((kind, count))
    }

    fn bytes<'n>(
        &'n self,
        node: &'n Node<'_>,
        kind: Kind,
        count: u64,
    ) -> Result<Cow<'n, [u8]>, VtkError> {
        let expected = count.saturating_mul(kind.size() as u64);
        let Format::Appended(offset) = node.format else {
            let text = node.text.trim_ascii();
            if !text.bytes().any(|c| c.is_ascii_whitespace()) {
                return decode(
                    &node.place,
                    Source::Base64(text.as_bytes()),
                    self.layout,
                    expected,
                );
            }
            let text: String = text.split_ascii_whitespace().collect();
            let source = Source::Base64(text.as_bytes());
            let bytes = decode(&node.place, source, self.layout, expected)?;
            return Ok(Cow::Owned(bytes.into_owned()));
        };
        let appended = self.appended.and_then(|source| {
            let offset = usize::try_from(offset).ok()?;
            Some(match source {
                Source::Base64(text) => Source::Base64(text.get(offset..)?),
                Source::Raw(data) => Source::Raw(data.get(offset..)?),
            })
        });
        let source = appended.ok_or_else(|| {
            VtkError::malformed(&node.place, format!("no appended data at offset {offset}"))
        })?;
        decode(&node.place, source, self.layout, expected)
    }
}

/// Splits off the appended data: (XML before them, source).
fn split_appended(bytes: &[u8]) -> Result<(&[u8], Option<Source<'_>>), VtkError> {
    const TAG: &[u8] = b"<AppendedData";
    let Some(at) = bytes.windows(TAG.len()).position(|window| window == TAG) else {
        return Ok((bytes, None));
    };
    let fault = |problem: &str| VtkError::malformed("AppendedData", problem);
    let (xml, rest) = bytes.split_at(at);
    let close = rest.iter().position(|&c| c == b'>');
    let (tag, data) = rest.split_at(close.ok_or_else(|| fault("the tag does not end"))?);
    let tag = std::str::from_utf8(&tag[1..]).map_err(|_| fault("the tag is not UTF-8"))?;
    let tag = BytesStart::from_content(tag, TAG.len() - 1);
    let encoding = attribute(&tag, "encoding")?;
    // The data begin behind an underscore.
    let mark = data.iter().position(|&c| c == b'_');
    let data = &data[mark.ok_or_else(|| fault("the underscore before the data is missing"))? + 1..];
    match encoding.as_deref() {
        Some("raw") => Ok((xml, Some(Source::Raw(data)))),
        Some("base64") => {
            let end = data.iter().position(|&c| c == b'<').unwrap_or(data.len());
            Ok((xml, Some(Source::Base64(data[..end].trim_ascii_end()))))
        }
        _ => Err(fault("the encoding is neither raw nor base64")),
    }
}

fn scan(bytes: &[u8]) -> Result<Document<'_>, VtkError> {
    let (xml, appended) = split_appended(bytes)?;
    let text = std::str::from_utf8(xml).map_err(|error| {
        let problem = format!("byte {} is not UTF-8 text", error.valid_up_to());
        VtkError::malformed("XML", problem)
    })?;
    let mut reader = Reader::from_str(text);
    let mut head: Option<(bool, Layout)> = None;
    let mut counts = None;
    let mut nodes: Vec<Node<'_>> = Vec::new();
    // Names of the open elements; whether the last node is still open for text.
    let mut open: Vec<String> = Vec::new();
    loop {
        let event = reader.read_event().map_err(xml_error)?;
        match event {
            Event::Start(ref tag) | Event::Empty(ref tag) => {
                match (tag.name().as_ref(), &head) {
                    ("VTKFile", None) => head = Some(file_head(tag)?),
                    (name, None) => {
                        let problem =
                            format!("a VTK file was expected, but it starts with <{name:.40}>");
                        return Err(VtkError::malformed("XML", problem));
                    }
                    ("Piece", Some(_)) if counts.is_some() => {
                        return Err(VtkError::Unsupported {
                            what: "a file of several pieces".into(),
                            mend: "merge them (in viewers: \"Append\" and \"Clean\") and save again",
                        });
                    }
                    ("Piece", Some((is_grid, _))) => counts = Some(piece_counts(tag, *is_grid)?),
                    ("DataArray" | "Array", Some(_)) => {
                        check_limit("number of arrays", nodes.len() as u64 + 1, MAX_ARRAYS)?;
                        let section = open.last().cloned().unwrap_or_default();
                        nodes.push(array_node(tag, section)?);
                    }
                    _ => {}
                }
                if matches!(event, Event::Start(_)) {
                    open.push(tag.name().as_ref().to_owned());
                    check_limit("nesting of elements", open.len() as u64, MAX_DEPTH)?;
                }
            }
            Event::End(_) => {
                open.pop();
            }
            Event::Text(text) => {
                let text = text.into_inner();
                let inside = open
                    .last()
                    .is_some_and(|name| name == "DataArray" || name == "Array");
                if let (true, false, Some(node)) =
                    (inside, text.trim_ascii().is_empty(), nodes.last_mut())
                {
                    if !node.text.is_empty() {
                        let problem = "its data are interrupted by other elements";
                        return Err(VtkError::malformed(&node.place, problem));
                    }
                    node.text = text;
                }
            }
            Event::GeneralRef(_) | Event::CData(_)
                if open.last().is_some_and(|n| n == "DataArray") =>
            {
                return Err(VtkError::malformed(
                    "DataArray",
                    "plain text is needed here",
                ));
            }
            Event::Eof => break,
            _ => {}
        }
    }
    // With appended data the last elements are cut off with them.
    if appended.is_none() && !open.is_empty() {
        let problem = format!("the file ends inside <{:.40}>", open[open.len() - 1]);
        return Err(VtkError::malformed("XML", problem));
    }
    let (is_grid, layout) =
        head.ok_or_else(|| VtkError::malformed("file", "this is no VTK file"))?;
    let counts = counts.ok_or_else(|| VtkError::malformed("XML", "there is no <Piece>"))?;
    Ok(Document {
        is_grid,
        layout,
        counts,
        nodes,
        appended,
    })
}

fn file_head(tag: &BytesStart<'_>) -> Result<(bool, Layout), VtkError> {
    let unsupported = |what: String, mend| VtkError::Unsupported { what, mend };
    let kind = attribute(tag, "type")?.unwrap_or_default();
    let is_grid = match kind.as_ref() {
        "UnstructuredGrid" => true,
        "PolyData" => false,
        other => {
            let what = format!("a VTK file of type \"{other:.60}\"");
            let mend = "save the surface as PolyData (.vtp) or UnstructuredGrid (.vtu)";
            return Err(unsupported(what, mend));
        }
    };
    let order = match attribute(tag, "byte_order")?.as_deref() {
        None | Some("LittleEndian") => Order::Little,
        Some("BigEndian") => Order::Big,
        Some(_) => return Err(VtkError::malformed("VTKFile", "the byte_order is unknown")),
    };
    let word = match attribute(tag, "header_type")?.as_deref() {
        None | Some("UInt32") => 4,
        Some("UInt64") => 8,
        Some(_) => return Err(VtkError::malformed("VTKFile", "the header_type is unknown")),
    };
    let compressor = match attribute(tag, "compressor")?.as_deref() {
        None | Some("") => None,
        Some("vtkZLibDataCompressor") => Some(Compressor::Zlib),
        Some("vtkLZ4DataCompressor") => Some(Compressor::Lz4),
        Some("vtkLZMADataCompressor") => Some(Compressor::Lzma),
        Some(other) => {
            let what = format!("the compressor \"{other:.60}\"");
            return Err(unsupported(what, "save with zlib, LZ4, LZMA or none"));
        }
    };
    let layout = Layout {
        order,
        word,
        compressor,
    };
    Ok((is_grid, layout))
}

fn piece_counts(tag: &BytesStart<'_>, is_grid: bool) -> Result<Counts, VtkError> {
    let count = |name: &str| number(tag, name, "Piece");
    let missing = |name: &str| VtkError::malformed("Piece", format!("{name} is missing"));
    let points = count("NumberOfPoints")?.ok_or_else(|| missing("NumberOfPoints"))?;
    if is_grid {
        let cells = count("NumberOfCells")?.ok_or_else(|| missing("NumberOfCells"))?;
        return Ok(Counts { points, cells });
    }
    for (name, kind) in [
        ("NumberOfVerts", "a vertex"),
        ("NumberOfLines", "a line"),
        ("NumberOfStrips", "a triangle strip"),
    ] {
        if count(name)?.is_some_and(|count| count > 0) {
            return Err(VtkError::UnsupportedCell {
                cell: 0,
                kind: kind.into(),
            });
        }
    }
    Ok(Counts {
        points,
        cells: count("NumberOfPolys")?.unwrap_or(0),
    })
}

fn array_node(tag: &BytesStart<'_>, section: String) -> Result<Node<'static>, VtkError> {
    let name = attribute(tag, "Name")?.unwrap_or_default().into_owned();
    let place = format!("{section:.40}/{name:.60}");
    let fault = |problem: &str| VtkError::malformed(place.as_str(), problem);
    let components = number(tag, "NumberOfComponents", &place)?.unwrap_or(1);
    if components == 0 {
        return Err(fault("an array needs at least one component"));
    }
    let format = match attribute(tag, "format")?.as_deref() {
        None | Some("ascii") => Format::Ascii,
        Some("binary") => Format::Inline,
        Some("appended") => {
            let offset = number(tag, "offset", &place)?;
            Format::Appended(offset.ok_or_else(|| fault("its offset is missing"))?)
        }
        Some(_) => return Err(fault("its format is unknown")),
    };
    let kind = attribute(tag, "type")?.as_deref().and_then(Kind::from_xml);
    Ok(Node {
        kind,
        components,
        tuples: number(tag, "NumberOfTuples", &place)?,
        format,
        text: Cow::Borrowed(""),
        section,
        name,
        place,
    })
}

/// An attribute that is a count.
fn number(tag: &BytesStart<'_>, name: &str, at: &str) -> Result<Option<u64>, VtkError> {
    let Some(text) = attribute(tag, name)? else {
        return Ok(None);
    };
    match text.trim_ascii().parse() {
        Ok(count) => Ok(Some(count)),
        Err(_) => Err(VtkError::malformed(
            at,
            format!("{name} is no count: {text:.40}"),
        )),
    }
}
