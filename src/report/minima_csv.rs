//! `minima.csv`: the ledger as a table, a row a minimum, lowest first.

use std::collections::{BTreeMap, BTreeSet};

use super::minima_file::{MinimaFile, Minimum};
use super::nested::Nested;

/// The table: `rank`, `value`, `kind`, `residual`, `softest`, `stiffest`, a column `hits <heuristic>` each, `first
/// evaluation`, `first round`, `first heuristic`, `show <name>` for each shown quantity, and the unknowns under their
/// own names, each element with its indices as in the problem.
pub fn minima_csv(file: &MinimaFile) -> Result<String, csv::Error> {
    let heuristics: BTreeSet<&str> = file.minima.iter().flat_map(|m| m.hits.keys()).map(String::as_str).collect();
    let mut writer = csv::Writer::from_writer(Vec::new());
    for (number, minimum) in file.minima.iter().enumerate() {
        let mut cells = cells(number + 1, minimum, &heuristics);
        cells.extend(columns("show ", &minimum.shows, &file.problem.first_indices));
        cells.extend(columns("", &minimum.at, &file.problem.first_indices));
        if number == 0 {
            writer.write_record(cells.iter().map(|cell| &cell.0))?;
        }
        writer.write_record(cells.iter().map(|cell| &cell.1))?;
    }
    let bytes = writer.into_inner().map_err(|error| csv::Error::from(error.into_error()))?;
    Ok(String::from_utf8_lossy(&bytes).into_owned())
}

fn cells(rank: usize, minimum: &Minimum, heuristics: &BTreeSet<&str>) -> Vec<(String, String)> {
    let end = |stiffness: Option<&f64>| stiffness.map(f64::to_string).unwrap_or_default();
    let mut cells = vec![
        ("rank".to_string(), rank.to_string()),
        ("value".to_string(), minimum.value.to_string()),
        ("kind".to_string(), minimum.kind.clone()),
        ("residual".to_string(), minimum.residual.to_string()),
        ("softest".to_string(), end(minimum.stiffness.iter().find(|&&stiffness| stiffness != 0.0))),
        ("stiffest".to_string(), end(minimum.stiffness.last())),
    ];
    for &heuristic in heuristics {
        let count = minimum.hits.get(heuristic).copied().unwrap_or(0);
        cells.push((format!("hits {heuristic}"), count.to_string()));
    }
    cells.push(("first evaluation".to_string(), minimum.first.evaluation.to_string()));
    cells.push(("first round".to_string(), minimum.first.round.to_string()));
    cells.push(("first heuristic".to_string(), minimum.first.heuristic.clone()));
    cells
}

fn columns(
    prefix: &str,
    values: &BTreeMap<String, Nested>,
    first_indices: &BTreeMap<String, Vec<i64>>,
) -> Vec<(String, String)> {
    let mut columns = Vec::new();
    for (name, value) in values {
        let name = format!("{prefix}{name}");
        let firsts = first_indices.get(&name).map_or(&[][..], Vec::as_slice);
        add_columns(&name, firsts, &mut Vec::new(), value, &mut columns);
    }
    columns
}

fn add_columns(name: &str, firsts: &[i64], place: &mut Vec<i64>, value: &Nested, columns: &mut Vec<(String, String)>) {
    match value {
        Nested::Number(number) if place.is_empty() => columns.push((name.to_string(), number.to_string())),
        Nested::Number(number) => {
            let indices: Vec<String> = place.iter().map(i64::to_string).collect();
            columns.push((format!("{name}[{}]", indices.join(", ")), number.to_string()));
        }
        Nested::Array(parts) => {
            for (number, part) in parts.iter().enumerate() {
                place.push(firsts.get(place.len()).copied().unwrap_or(1) + number as i64);
                add_columns(name, firsts, place, part, columns);
                place.pop();
            }
        }
    }
}

#[cfg(test)]
mod tests {
    use super::super::minima_file::tests::sample;
    use super::*;

    #[test]
    fn the_table_has_a_row_a_minimum() {
        assert_eq!(
            minima_csv(&sample()).unwrap(),
            "rank,value,kind,residual,softest,stiffest,hits hop,hits survey,first evaluation,first round,\
             first heuristic,show width,\"p[1, 1]\",\"p[1, 2]\",\"p[2, 1]\",\"p[2, 2]\"\n\
             1,-1,interior,0.000000000000003,2.5,7,5,39,1204,3,hop,0.25,0.3333333333333333,0.1,-0."
                .to_string()
                + &"0".repeat(299)
                + "1,4\n\
             2,-0.5,interior,0.000000000000003,2.5,7,0,1,1204,3,hop,0.25,2,0.1,-0."
                + &"0".repeat(299)
                + "1,4\n"
        );
    }

    /// The header of a family with a range of its own is that of the problem, which a table of starts is read by.
    #[test]
    fn indices_are_those_of_the_problem() {
        let mut file = sample();
        file.problem.first_indices = [("p".to_string(), vec![0, -1])].into();
        let table = minima_csv(&file).unwrap();
        assert!(
            table.lines().next().unwrap().ends_with("\"p[0, -1]\",\"p[0, 0]\",\"p[1, -1]\",\"p[1, 0]\""),
            "{table}"
        );
    }
}
