//! Rows and their schema to CSV and Parquet, through polars.
//! An absent value is an empty field or null. The bytes depend on the rows alone: order is fixed and
//! nothing of the machine, the clock or the thread count enters.

use std::io::Write;

use polars::prelude::{
    Column as Series, CsvWriter, DataFrame, NamedFrom, ParquetCompression, ParquetWriter, SerWriter, Series as Plain,
};

use super::Error;
use super::schema::{Table, Values, round};

/// The rows as CSV: UTF-8, comma, one heading line, numbers as short as their decimals allow.
///
/// # Errors
/// [`Error::Made`] when the library cannot write to `out`.
pub fn write_csv<R>(table: &Table<R>, rows: &[R], out: impl Write) -> Result<(), Error> {
    let mut frame = data_frame(table, rows)?;
    CsvWriter::new(out).n_threads(1).finish(&mut frame).map_err(|why| Error::made(table.name, why))
}

/// The named columns of the rows as CSV, in the order named; a name that is no column is left out.
///
/// # Errors
/// As [`write_csv`].
pub fn write_some<R>(table: &Table<R>, rows: &[R], names: &[&str], out: impl Write) -> Result<(), Error> {
    let named = names.iter().filter_map(|name| table.columns.iter().find(|column| column.name == *name));
    let columns = named.map(|c| series(c.name, &c.values, rows)).collect();
    let mut frame = DataFrame::new(rows.len(), columns).map_err(|why| Error::made(table.name, why))?;
    CsvWriter::new(out).n_threads(1).finish(&mut frame).map_err(|why| Error::made(table.name, why))
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
    let columns = table.columns.iter().map(|c| series(c.name, &c.values, rows)).collect();
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

#[cfg(test)]
mod tests {
    use std::io::Cursor;

    use polars::prelude::{ParquetReader, SerReader};

    use super::*;
    use crate::report::example;
    use crate::report::schema::{FILAMENTS, FORECASTS, FRAMES, GROWTH, PATHS, TURNS};

    fn csv<R>(table: &Table<R>, rows: &[R]) -> String {
        let mut bytes = Vec::new();
        write_csv(table, rows, &mut bytes).unwrap();
        String::from_utf8(bytes).unwrap()
    }

    /// The columns that scripts rely on, first and in this order; more may follow.
    #[test]
    fn promised_columns_stand_first() {
        let frames = "frame,file,time_s,usable,reason,drift_x_px,drift_y_px,load_n,load_direction_deg,stress_mpa,depth_um,\
                      depth_fraction,front_depth_um,deepest_x_px,deepest_y_px,filaments,tips,length_um,area_um2,unrooted,\
                      alignment,growth_alignment,";
        let paths = "frame,time_s,filament,path,length_um,chord_um,width_um,angle_deg,angle_to_load_deg,x0_px,y0_px,x1_px,\
                     y1_px,ends_in,";
        let growth = "frame,time_s,load_time_s,filament,x_px,y_px,length_um,angle_deg,load_direction_deg,angle_to_load_deg,\
                      stress_mpa,";
        let filaments =
            "filament,first_time_s,root,root_x_px,root_y_px,final_depth_um,final_length_um,tips,bridged,turned\n";
        let forecasts =
            "frame,issued_at_s,p025_s,p10_s,p25_s,p50_s,p75_s,p90_s,p975_s,horizon_s,chance_by_horizon,model\n";
        assert!(csv(&FRAMES, &[]).starts_with(frames));
        assert!(csv(&PATHS, &[]).starts_with(paths));
        assert!(csv(&GROWTH, &[]).starts_with(growth));
        assert_eq!(csv(&FILAMENTS, &[]), filaments);
        assert_eq!(csv(&FORECASTS, &[]), forecasts);
    }

    #[test]
    fn a_step_of_the_load_is_a_row() {
        let text = csv(&TURNS, &example::growing().turns);
        assert!(
            text.starts_with("step,time_s,axis_before_deg,axis_after_deg,stress_before_mpa,stress_after_mpa,"),
            "{text}"
        );
        assert!(text.lines().nth(1).unwrap().starts_with("1,720.0,90.0,30.0,150.0,120.0,30.0,"), "{text}");
        assert!(text.trim_end().ends_with(",9,7,0.9,0.0004,turned"), "{text}");
    }

    #[test]
    fn what_is_absent_is_empty() {
        let mut results = example::growing();
        results.frames.truncate(1);
        results.frames[0].drift_x_px = Some(f64::NAN);
        results.frames[0].time_s = 0.000_01;
        results.frames[0].file = "a,\"b\".png".into();
        let text = csv(&FRAMES, &results.frames);
        let line = text.lines().nth(1).unwrap();
        assert!(line.starts_with("0,\"a,\"\"b\"\".png\",0.0,true,,,0.3,2.08,90.0,150.0,,,"), "{line}");
    }

    #[test]
    fn parquet_holds_the_same_values() {
        let results = example::growing();
        let mut bytes = Vec::new();
        write_parquet(&FRAMES, &results.frames, &mut bytes).unwrap();
        let back = ParquetReader::new(Cursor::new(bytes)).finish().unwrap();
        assert!(back.equals_missing(&data_frame(&FRAMES, &results.frames).unwrap()));
        assert_eq!(back.height(), results.frames.len());
    }
}
