//! Tables of the page, with headings, captions and meanings from the schema.

use serde::Serialize;

use crate::report::schema::{Column, Table, Values};

/// Rows that the page shows; the CSV has them all.
const ROWS: usize = 500;

/// A table in ready strings.
#[derive(Serialize)]
pub(super) struct Grid {
    title: &'static str,
    name: &'static str,
    caption: String,
    heads: Vec<Head>,
    rows: Vec<Vec<String>>,
}

#[derive(Serialize)]
struct Head {
    label: String,
    meaning: &'static str,
    number: bool,
}

/// The whole table.
pub(super) fn of<R>(title: &'static str, table: &Table<R>, rows: &[R]) -> Grid {
    with(title, table, rows, table.columns.iter().collect())
}

/// The columns that are named, in that order; the CSV has them all.
pub(super) fn some<R>(title: &'static str, table: &Table<R>, rows: &[R], names: &[&str]) -> Grid {
    let column = |name: &&str| table.columns.iter().find(|column| column.name == *name);
    with(title, table, rows, names.iter().filter_map(column).collect())
}

fn with<R>(title: &'static str, table: &Table<R>, rows: &[R], columns: Vec<&Column<R>>) -> Grid {
    let cut = if rows.len() > ROWS { format!(", the last {ROWS} of {}", rows.len()) } else { String::new() };
    Grid {
        title,
        name: table.name,
        caption: format!("{title}: {}{cut}.", table.row),
        heads: columns.iter().map(|column| head(column)).collect(),
        rows: rows[rows.len().saturating_sub(ROWS)..].iter().map(|row| cells(&columns, row)).collect(),
    }
}

fn head<R>(column: &Column<R>) -> Head {
    /// Endings that say the unit, which the label gives in its own way; longer ones first.
    const UNITS: [&str; 11] =
        ["_mah_per_cm2", "_um_per_s", "_mah", "_ma", "_um3", "_um2", "_um", "_mpa", "_deg", "_px", "_s"];
    let bare = UNITS.iter().find_map(|unit| column.name.strip_suffix(unit));
    let words = bare.unwrap_or(column.name).replace('_', " ");
    let label = if matches!(column.unit, "" | "1") { words } else { format!("{words} ({})", column.unit) };
    Head { label, meaning: column.meaning, number: matches!(column.values, Values::Count(_) | Values::Number(..)) }
}

/// As in the table, with fewer decimals: one for lengths, angles and times, three for ratios; charge keeps its own.
fn cells<R>(columns: &[&Column<R>], row: &R) -> Vec<String> {
    let show = |column: &Column<R>| match column.values {
        Values::Number(decimals, get) => {
            let most = match column.unit {
                "1" => 3,
                "mAh" | "mAh/cm²" => decimals,
                _ => 1,
            };
            Values::Number(decimals.min(most), get).show(row)
        }
        _ => column.values.show(row),
    };
    columns.iter().map(|column| show(column)).collect()
}
