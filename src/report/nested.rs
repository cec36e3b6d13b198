//! Values of a family, as a number or nested arrays.

use serde::{Deserialize, Serialize};

/// A number, or an array of such.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
#[serde(untagged)]
pub enum Nested {
    /// One number.
    Number(f64),
    /// The elements along one index.
    Array(Vec<Nested>),
}

impl Nested {
    /// The numbers, row by row.
    pub fn flat(&self) -> Vec<f64> {
        let mut numbers = Vec::new();
        self.collect(&mut numbers);
        numbers
    }

    fn collect(&self, numbers: &mut Vec<f64>) {
        match self {
            Nested::Number(number) => numbers.push(*number),
            Nested::Array(parts) => parts.iter().for_each(|part| part.collect(numbers)),
        }
    }
}

/// Nests values, which stand row by row, into arrays of the given counts; no counts make a single number.
///
/// ```
/// use thalweg::report::{Nested, nest};
/// assert_eq!(nest(&[1.5], &[]), Nested::Number(1.5));
/// assert_eq!(serde_json::to_string(&nest(&[1.0, 2.0, 3.0, 4.0], &[2, 2])).unwrap(), "[[1.0,2.0],[3.0,4.0]]");
/// ```
pub fn nest(values: &[f64], counts: &[usize]) -> Nested {
    match counts {
        [] => Nested::Number(values.first().copied().unwrap_or(f64::NAN)),
        [_] => Nested::Array(values.iter().copied().map(Nested::Number).collect()),
        [first, rest @ ..] => {
            let size = values.len() / (*first).max(1);
            Nested::Array(values.chunks(size.max(1)).map(|part| nest(part, rest)).collect())
        }
    }
}
