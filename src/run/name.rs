//! Names of runs.

use std::fmt;

/// The longest name in bytes: common file systems allow 255, and a counter may follow.
const LONGEST: usize = 200;

/// Why a name was refused.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum NameError {
    /// It is empty.
    Empty,
    /// It is longer than file systems allow.
    TooLong,
    /// It begins with a dot or a dash.
    BadBeginning,
    /// It holds this character.
    BadCharacter(char),
}

impl fmt::Display for NameError {
    fn fmt(&self, out: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            NameError::Empty => write!(out, "the name is empty"),
            NameError::TooLong => write!(out, "the name is longer than {LONGEST} bytes"),
            NameError::BadBeginning => write!(out, "a name begins with a letter, a digit or `_`"),
            NameError::BadCharacter(character) => {
                write!(
                    out,
                    "`{}` cannot stand in a name; letters, digits, `.`, `-`, `_` can",
                    character.escape_default()
                )
            }
        }
    }
}

/// Whether a name can be that of a run folder: one path component, the same on every system.
///
/// # Errors
/// A [`NameError`] for the first thing that is wrong.
pub fn demand_valid_name(name: &str) -> Result<(), NameError> {
    if name.is_empty() {
        return Err(NameError::Empty);
    }
    if name.len() > LONGEST {
        return Err(NameError::TooLong);
    }
    if name.starts_with(['.', '-']) {
        return Err(NameError::BadBeginning);
    }
    match name.chars().find(|&character| !(character.is_alphanumeric() || "._-=".contains(character))) {
        Some(character) => Err(NameError::BadCharacter(character)),
        None => Ok(()),
    }
}

/// The beginning of a run's default name, from the problem file's own name and the givens: `pore-n13`.
///
/// ```
/// assert_eq!(thalweg::run::stem("pore.land", &[("n".into(), 13.0)]), "pore-n13");
/// ```
pub fn stem(file: &str, givens: &[(String, f64)]) -> String {
    let base = file.strip_suffix(".land").unwrap_or(file);
    let mut name: String =
        base.chars().map(|c| if c.is_alphanumeric() || "._-".contains(c) { c } else { '-' }).collect();
    for (given, value) in givens {
        name.push_str(&format!("-{given}{value}"));
    }
    let name = name.trim_start_matches(['.', '-']);
    // The end of a long name goes; the counter that follows keeps names apart.
    let mut end = name.len().min(LONGEST - 30);
    while !name.is_char_boundary(end) {
        end -= 1;
    }
    if end == 0 { "run".to_string() } else { name[..end].to_string() }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn names_that_leave_the_folder_are_refused() {
        for (name, cause) in [
            ("", NameError::Empty),
            ("..", NameError::BadBeginning),
            ("-x", NameError::BadBeginning),
            ("a/b", NameError::BadCharacter('/')),
            ("a\\b", NameError::BadCharacter('\\')),
            ("a\nb", NameError::BadCharacter('\n')),
        ] {
            assert_eq!(demand_valid_name(name), Err(cause), "{name:?}");
        }
        assert_eq!(demand_valid_name(&"x".repeat(201)), Err(NameError::TooLong));
        assert_eq!(demand_valid_name("pore-n13-2"), Ok(()));
    }

    #[test]
    fn every_stem_is_a_valid_name() {
        for file in ["pore.land", ".land", "my pore.land", "---", "..", &"x".repeat(400), &"ü".repeat(300)] {
            let name = stem(file, &[("n".to_string(), -0.5)]);
            assert_eq!(demand_valid_name(&name), Ok(()), "{file} gives {name}");
        }
    }
}
