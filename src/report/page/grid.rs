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

pub(super) fn of<R>(title: &'static str, table: &Table<R>, rows: &[R]) -> Grid {
    let cut = if rows.len() > ROWS {
        format!(", the last {ROWS} of {}", rows.len())
    } else {
        String::new()
    };
    Grid {
        title,
        name: table.name,
        caption: format!("{title}: {}{cut}.", table.row),
        heads: table.columns.iter().map(head).collect(),
        rows: rows[rows.len().saturating_sub(ROWS)..]
            .iter()
            .map(|row| cells(table, row))
            .collect(),
    }
}

fn head<R>(column: &Column<R>) -> Head {
    let bare = ["_um2", "_um", "_mpa", "_deg", "_px", "_s"]
        .iter()
        .find_map(|unit| column.name.strip_suffix(unit));
    let words = bare.unwrap_or(column.name).replace('_', " ");
    let label = if matches!(column.unit, "" | "1") {
        words
    } else {
        format!("{words} ({})", column.unit)
    };
    Head {
        label,
        meaning: column.meaning,
        number: matches!(column.values, Values::Count(_) | Values::Number(..)),
    }
}

/// As in the table, with fewer decimals: one for lengths, angles and times, three for ratios.
fn cells<R>(table: &Table<R>, row: &R) -> Vec<String> {
    let show = |column: &Column<R>| match column.values {
        Values::Number(decimals, get) => {
            let most = if column.unit == "1" { 3 } else { 1 };
            Values::Number(decimals.min(most), get).show(row)
        }
        _ => column.values.show(row),
    };
    table.columns.iter().map(show).collect()
}
