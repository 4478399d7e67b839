//! Rows and their schema to CSV and Parquet, through polars.
//! An absent value is an empty field or null. The bytes depend on the rows alone: order is fixed and
//! nothing of the machine, the clock or the thread count enters.

use std::io::Write;

use polars::prelude::{
    Column as Series, CsvWriter, DataFrame, NamedFrom, ParquetCompression, ParquetWriter,
    SerWriter, Series as Plain,
};

use super::Error;
use super::schema::{Table, Values, round};

/// The rows as CSV: UTF-8, comma, one heading line, numbers as short as their decimals allow.
///
/// # Errors
/// [`Error::Made`] when the library cannot write to `out`.
pub fn write_csv<R>(table: &Table<R>, rows: &[R], out: impl Write) -> Result<(), Error> {
    let mut frame = data_frame(table, rows)?;
    CsvWriter::new(out)
        .n_threads(1)
        .finish(&mut frame)
        .map_err(|why| Error::made(table.name, why))
}

/// The rows as Parquet: one row group, not compressed beyond its own encodings.
///
/// # Errors
/// [`Error::Made`] when the library cannot write to `out`.
pub fn write_parquet<R>(table: &Table<R>, rows: &[R], out: impl Write) -> Result<(), Error> {
    let mut frame = data_frame(table, rows)?;
    ParquetWriter::new(out)
        .with_compression(ParquetCompression::Uncompressed)
        .set_parallel(false)
        .finish(&mut frame)
        .map(|_bytes| ())
        .map_err(|why| Error::made(table.name, why))
}

/// The table in memory, columns as in the schema.
fn data_frame<R>(table: &Table<R>, rows: &[R]) -> Result<DataFrame, Error> {
    let columns = table
        .columns
        .iter()
        .map(|c| series(c.name, &c.values, rows))
        .collect();
    DataFrame::new(rows.len(), columns).map_err(|why| Error::made(table.name, why))
}

/// One column. An empty text and a number that is not finite are absent.
fn series<R>(name: &str, values: &Values<R>, rows: &[R]) -> Series {
    let name = name.into();
    match values {
        Values::Count(get) => Plain::new(name, rows.iter().map(get).collect::<Vec<_>>()),
        Values::Number(decimals, get) => {
            let rounded = |row: &R| get(row).and_then(|x| round(x, *decimals));
            Plain::new(name, rows.iter().map(rounded).collect::<Vec<_>>())
        }
        Values::Text(get) => {
            let filled = |row: &R| get(row).filter(|text| !text.is_empty());
            Plain::new(name, rows.iter().map(filled).collect::<Vec<_>>())
        }
        Values::Flag(get) => Plain::new(name, rows.iter().map(get).collect::<Vec<_>>()),
    }
    .into()
}
