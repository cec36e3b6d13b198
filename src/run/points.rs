//! Points that the user already has, from a CSV table.
//!
//! The header names the unknowns as reports do: `x`, `p[2, 3]` (quoted, since it holds a comma; `p[2;3]` is accepted
//! too, and blanks do not matter). The columns stand in any order; every unknown has one. Each further row is a point.

use std::fmt;

use crate::landscape::Landscape;

/// Why a table of points was refused. Rows are counted in the file's records, the header being row 1.
#[derive(Clone, Debug, PartialEq)]
pub enum PointsError {
    /// It is not CSV, or its rows differ in length.
    Form(String),
    /// A column names no unknown.
    UnknownColumn(String),
    /// Two columns name the same unknown.
    RepeatedColumn(String),
    /// An unknown has no column.
    MissingColumn(String),
    /// There is a header and nothing else, or not even that.
    Empty,
    /// A cell is not a finite number.
    NotANumber {
        /// The row.
        row: usize,
        /// The column's name.
        column: String,
        /// The cell.
        cell: String,
    },
    /// A cell lies outside the bounds of its unknown.
    OutOfBounds {
        /// The row.
        row: usize,
        /// The column's name.
        column: String,
        /// The number.
        value: f64,
        /// The bounds.
        bounds: (f64, f64),
    },
}

impl fmt::Display for PointsError {
    fn fmt(&self, out: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            PointsError::Form(cause) => write!(out, "it is not a table of comma-separated values: {cause}"),
            PointsError::UnknownColumn(name) => write!(out, "the column `{name}` names no unknown of the problem"),
            PointsError::RepeatedColumn(name) => write!(out, "two columns give `{name}`"),
            PointsError::MissingColumn(name) => write!(out, "no column gives `{name}`"),
            PointsError::Empty => write!(out, "it holds no point; the header names the unknowns, each row is a point"),
            PointsError::NotANumber { row, column, cell } => {
                write!(out, "row {row}, column `{column}`: `{}` is not a finite number", cell.escape_debug())
            }
            PointsError::OutOfBounds { row, column, value, bounds: (lower, upper) } => {
                write!(out, "row {row}, column `{column}`: {value} lies outside its bounds [{lower}, {upper}]")
            }
        }
    }
}

impl std::error::Error for PointsError {}

/// Reads a table of points; each point has one number per slot of the landscape.
///
/// # Errors
/// A [`PointsError`] for the first thing that is wrong.
pub fn read_points(landscape: &Landscape, table: &str) -> Result<Vec<Vec<f64>>, PointsError> {
    let form = |error: csv::Error| PointsError::Form(error.to_string());
    let mut reader = csv::Reader::from_reader(table.trim_start_matches('\u{feff}').as_bytes());
    let names: Vec<String> = (0..landscape.slots.len()).map(|slot| landscape.slot_name(slot)).collect();
    let key = |name: &str| name.replace(';', ",").split_whitespace().collect::<String>();
    let by_key: std::collections::BTreeMap<String, usize> =
        names.iter().enumerate().map(|(slot, name)| (key(name), slot)).collect();
    let header = reader.headers().map_err(form)?.clone();
    if header.is_empty() {
        return Err(PointsError::Empty);
    }
    let mut slots = Vec::new();
    let mut given = vec![false; names.len()];
    for name in &header {
        let &slot = by_key.get(&key(name)).ok_or_else(|| PointsError::UnknownColumn(name.to_string()))?;
        if std::mem::replace(&mut given[slot], true) {
            return Err(PointsError::RepeatedColumn(names[slot].clone()));
        }
        slots.push(slot);
    }
    if let Some(missing) = given.iter().position(|&given| !given) {
        return Err(PointsError::MissingColumn(names[missing].clone()));
    }
    let mut points = Vec::new();
    for (number, record) in reader.records().enumerate() {
        let record = record.map_err(form)?;
        let mut point = vec![0.0; names.len()];
        for (&slot, cell) in slots.iter().zip(&record) {
            let (row, column) = (number + 2, names[slot].clone());
            let Some(value) = cell.trim().parse().ok().filter(|value: &f64| value.is_finite()) else {
                return Err(PointsError::NotANumber { row, column, cell: cell.to_string() });
            };
            let bounds = (landscape.slots[slot].lower, landscape.slots[slot].upper);
            if !(bounds.0 <= value && value <= bounds.1) {
                return Err(PointsError::OutOfBounds { row, column, value, bounds });
            }
            point[slot] = value;
        }
        points.push(point);
    }
    if points.is_empty() { Err(PointsError::Empty) } else { Ok(points) }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn read(table: &str) -> Result<Vec<Vec<f64>>, PointsError> {
        let text = "unknown x in [-1, 1]\nunknown p[1, 2] in [0, 9]\nminimise x^2 + p[1, 1]*p[1, 2]";
        let checked = crate::landscape::check(&crate::language::parse(text).file, &[]).unwrap();
        read_points(&checked.landscape.unwrap(), table)
    }

    #[test]
    fn columns_come_in_any_order() {
        let points = vec![vec![0.5, 1.0, 2.0], vec![-1.0, 0.0, 9.0]];
        assert_eq!(read("x,\"p[1, 1]\",\"p[1,2]\"\n0.5,1,2\n-1,0,9\n"), Ok(points.clone()));
        assert_eq!(read("\u{feff}p[1;2],x,p[1;1]\r\n2, 0.5,1\r\n9,-1,0"), Ok(points));
    }

    #[test]
    fn what_is_wrong_is_told_with_row_and_column() {
        let refused = |table: &str| read(table).unwrap_err();
        assert_eq!(refused(""), PointsError::Empty);
        assert_eq!(refused("x,p[1;1],p[1;2]\n"), PointsError::Empty);
        assert_eq!(refused("x,p[1;1],y\n"), PointsError::UnknownColumn("y".into()));
        assert_eq!(refused("x,x,p[1;1]\n"), PointsError::RepeatedColumn("x".into()));
        assert_eq!(refused("x,p[1;1]\n"), PointsError::MissingColumn("p[1, 2]".into()));
        assert!(matches!(refused("x,p[1;1],p[1;2]\n1,2\n"), PointsError::Form(_)));
        let text = refused("x,p[1;1],p[1;2]\n0,1,2\n0,nan,2\n").to_string();
        assert_eq!(text, "row 3, column `p[1, 1]`: `nan` is not a finite number");
        let text = refused("x,p[1;1],p[1;2]\n2,1,2\n").to_string();
        assert_eq!(text, "row 2, column `x`: 2 lies outside its bounds [-1, 1]");
    }
}
