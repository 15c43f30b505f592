//! The table in the Parquet format, for programs that want types.

use super::table::{Cells, Table};
use crate::failure::Failure;
use parquet::basic::{Compression, LogicalType, Repetition, Type as Physical};
use parquet::data_type::{ByteArray, ByteArrayType, DoubleType, Int64Type};
use parquet::errors::ParquetError;
use parquet::file::properties::WriterProperties;
use parquet::file::writer::{SerializedFileWriter, SerializedRowGroupWriter};
use parquet::schema::types::Type;
use std::sync::Arc;

/// A table as the bytes of a Parquet file: texts as UTF-8, numbers as doubles, counts as 64-bit integers; empty cells
/// are null. Equal tables give equal bytes.
///
/// # Errors
/// [`Failure::Files`] for a table too large for the format.
pub fn bytes(table: &Table) -> Result<Vec<u8>, Failure> {
    write(table).map_err(|error| Failure::Files(format!("the table cannot be written as Parquet: {error}")))
}

fn write(table: &Table) -> Result<Vec<u8>, ParquetError> {
    let fields = table.columns.iter().map(|column| {
        let (physical, logical) = match column.cells {
            Cells::Text(_) => (Physical::BYTE_ARRAY, Some(LogicalType::String)),
            Cells::Number(_) => (Physical::DOUBLE, None),
            Cells::Count(_) => (Physical::INT64, None),
        };
        Type::primitive_type_builder(&column.name, physical)
            .with_repetition(Repetition::OPTIONAL)
            .with_logical_type(logical)
            .build()
            .map(Arc::new)
    });
    let schema = Type::group_type_builder("runs").with_fields(fields.collect::<Result<_, _>>()?).build()?;
    let properties = WriterProperties::builder().set_compression(Compression::SNAPPY).build();
    let mut writer = SerializedFileWriter::new(Vec::new(), Arc::new(schema), Arc::new(properties))?;
    let mut group = writer.next_row_group()?;
    for column in &table.columns {
        write_column(&mut group, &column.cells)?;
    }
    group.close()?;
    writer.into_inner()
}

fn write_column(group: &mut SerializedRowGroupWriter<'_, Vec<u8>>, cells: &Cells) -> Result<(), ParquetError> {
    let Some(mut writer) = group.next_column()? else { return Ok(()) };
    match cells {
        Cells::Text(cells) => {
            let values: Vec<ByteArray> = cells.iter().flatten().map(|text| ByteArray::from(text.as_str())).collect();
            writer.typed::<ByteArrayType>().write_batch(&values, Some(&levels(cells)), None)?;
        }
        Cells::Number(cells) => {
            let values: Vec<f64> = cells.iter().flatten().copied().collect();
            writer.typed::<DoubleType>().write_batch(&values, Some(&levels(cells)), None)?;
        }
        Cells::Count(cells) => {
            let values: Vec<i64> = cells.iter().flatten().copied().collect();
            writer.typed::<Int64Type>().write_batch(&values, Some(&levels(cells)), None)?;
        }
    }
    writer.close()
}

/// 1 where a cell is filled, 0 where it is empty.
fn levels<T>(cells: &[Option<T>]) -> Vec<i16> {
    cells.iter().map(|cell| i16::from(cell.is_some())).collect()
}
