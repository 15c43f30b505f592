//! One frame as a VTU file (XML `UnstructuredGrid` of triangles).

use quick_xml::Writer;
use quick_xml::events::{BytesDecl, BytesText, Event};
use std::io::{self, Write};
use std::path::Path;

use crate::dataset::{Array, FieldText, Frame, TIME_VALUE, Values};
use crate::encode::{encode, float_bytes, value_bytes};
use crate::{Compression, Precision, VtkError, atomic};

/// VTK's code of the triangle as a cell type.
const VTK_TRIANGLE: u8 = 5;

/// Writes a frame; an existing file is replaced in one step once the new one is on the disk.
///
/// Arrays stand inline in base64, so that the file is well-formed XML.
///
/// # Errors
/// Those of [`Frame::validate`], before anything is touched; `Io` when the file cannot be
/// written, in which case an older file of that name is still whole.
pub fn write_vtu(path: &Path, frame: &Frame<'_>, compression: Compression) -> Result<(), VtkError> {
    frame.validate().map_err(|error| error.in_file(path))?;
    atomic::replace(path, |file| write_document(file, frame, compression))
}

fn write_document<W: Write>(
    file: W,
    frame: &Frame<'_>,
    compression: Compression,
) -> io::Result<()> {
    let mut xml = Writer::new_with_indent(file, b' ', 1);
    xml.write_event(Event::Decl(BytesDecl::new("1.0", Some("UTF-8"), None)))?;
    let mut root = xml.create_element("VTKFile").with_attributes([
        ("type", "UnstructuredGrid"),
        ("version", "1.0"),
        ("byte_order", "LittleEndian"),
        ("header_type", "UInt64"),
    ]);
    root = match compression {
        Compression::None => root,
        Compression::Lz4 => root.with_attribute(("compressor", "vtkLZ4DataCompressor")),
        Compression::Zlib => root.with_attribute(("compressor", "vtkZLibDataCompressor")),
    };
    root.write_inner_content(|xml| {
        xml.create_element("UnstructuredGrid")
            .write_inner_content(|xml| write_grid(xml, frame, compression))?;
        Ok(())
    })?;
    xml.into_inner().write_all(b"\n")
}

fn write_grid<W: Write>(
    xml: &mut Writer<W>,
    frame: &Frame<'_>,
    compression: Compression,
) -> io::Result<()> {
    if frame.time.is_some() || !frame.field_data.is_empty() {
        xml.create_element("FieldData").write_inner_content(|xml| {
            if let Some(time) = frame.time {
                write_time(xml, time, compression)?;
            }
            frame
                .field_data
                .iter()
                .try_for_each(|field| write_text(xml, field))
        })?;
    }
    let piece = xml
        .create_element("Piece")
        .with_attribute(("NumberOfPoints", frame.points.len().to_string().as_str()))
        .with_attribute(("NumberOfCells", frame.triangles.len().to_string().as_str()));
    piece.write_inner_content(|xml| {
        for (section, arrays) in [
            ("PointData", &frame.point_data),
            ("CellData", &frame.cell_data),
        ] {
            xml.create_element(section).write_inner_content(|xml| {
                arrays
                    .iter()
                    .try_for_each(|array| write_array(xml, array, frame.precision, compression))
            })?;
        }
        xml.create_element("Points").write_inner_content(|xml| {
            let bytes = float_bytes(frame.points.as_flattened(), Precision::Double);
            write_data(xml, "Points", "Float64", 3, &encode(&bytes, compression)?)
        })?;
        xml.create_element("Cells")
            .write_inner_content(|xml| write_cells(xml, frame.triangles, compression))?;
        Ok(())
    })?;
    Ok(())
}

fn write_cells<W: Write>(
    xml: &mut Writer<W>,
    triangles: &[[u32; 3]],
    compression: Compression,
) -> io::Result<()> {
    // 32-bit indices halve the size, but are signed in VTK; larger meshes need 64 bits.
    let corners = triangles.as_flattened();
    let narrow =
        corners.len() <= i32::MAX as usize && corners.iter().all(|&i| i <= i32::MAX as u32);
    let offsets = (1..=triangles.len() as u64).map(|cell| 3 * cell);
    let (kind, connectivity, offsets): (_, Vec<u8>, Vec<u8>) = if narrow {
        (
            "Int32",
            corners.iter().flat_map(|i| i.to_le_bytes()).collect(),
            offsets.flat_map(|end| (end as u32).to_le_bytes()).collect(),
        )
    } else {
        (
            "Int64",
            corners
                .iter()
                .flat_map(|&i| u64::from(i).to_le_bytes())
                .collect(),
            offsets.flat_map(|end| end.to_le_bytes()).collect(),
        )
    };
    let types = vec![VTK_TRIANGLE; triangles.len()];
    for (name, kind, bytes) in [
        ("connectivity", kind, connectivity),
        ("offsets", kind, offsets),
        ("types", "UInt8", types),
    ] {
        write_data(xml, name, kind, 1, &encode(&bytes, compression)?)?;
    }
    Ok(())
}

fn write_array<W: Write>(
    xml: &mut Writer<W>,
    array: &Array<'_>,
    precision: Precision,
    compression: Compression,
) -> io::Result<()> {
    let kind = match (&array.values, precision) {
        (Values::Integer(_), _) => "Int64",
        (_, Precision::Single) => "Float32",
        (_, Precision::Double) => "Float64",
    };
    let components = match array.values {
        Values::Vector(_) => 3,
        _ => 1,
    };
    let bytes = value_bytes(&array.values, precision);
    let text = encode(&bytes, compression)?;
    write_data(xml, &array.name, kind, components, &text)
}

fn write_data<W: Write>(
    xml: &mut Writer<W>,
    name: &str,
    kind: &str,
    components: usize,
    base64: &str,
) -> io::Result<()> {
    let mut element = xml
        .create_element("DataArray")
        .with_attribute(("type", kind))
        .with_attribute(("Name", name));
    // Left out for scalars, as VTK does: some readers take an explicit 1 for a matrix column.
    if components > 1 {
        let components = components.to_string();
        element = element.with_attribute(("NumberOfComponents", components.as_str()));
    }
    element
        .with_attribute(("format", "binary"))
        .write_text_content(BytesText::from_escaped(base64))?;
    Ok(())
}

/// The time as VTK's readers look for it.
fn write_time<W: Write>(
    xml: &mut Writer<W>,
    time: f64,
    compression: Compression,
) -> io::Result<()> {
    let text = encode(&time.to_le_bytes(), compression)?;
    xml.create_element("DataArray")
        .with_attributes([
            ("type", "Float64"),
            ("Name", TIME_VALUE),
            ("NumberOfTuples", "1"),
            ("format", "binary"),
        ])
        .write_text_content(BytesText::from_escaped(text))?;
    Ok(())
}

/// A text as VTK stores it: its UTF-8 codes in decimal, closed by a zero.
fn write_text<W: Write>(xml: &mut Writer<W>, field: &FieldText) -> io::Result<()> {
    let mut codes = String::with_capacity(4 * field.text.len() + 1);
    for byte in field.text.bytes() {
        codes.push_str(&byte.to_string());
        codes.push(' ');
    }
    codes.push('0');
    xml.create_element("Array")
        .with_attribute(("type", "String"))
        .with_attribute(("Name", field.name.as_str()))
        .with_attribute(("NumberOfTuples", "1"))
        .with_attribute(("format", "ascii"))
        .write_text_content(BytesText::from_escaped(codes))?;
    Ok(())
}
