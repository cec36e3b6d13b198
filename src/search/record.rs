//! What a round came to, in a form that can be written down and taken in again.
//!
//! A hunt's state is never stored: it follows from the records of its rounds, because drawing a round is cheap and depends
//! on nothing but the state before. So a record has only what the work itself found. An arrival at known entries is their
//! numbers and no coordinates, since nearly all arrivals of a long hunt are such.
//!
//! The text of a round is its check and its tasks, separated by `;`. A task is the number of its heuristic (or `c` for a
//! confirmation), its evaluations, and what was found:
//!
//! | text | found |
//! | --- | --- |
//! | `5 104=17` | the entry 17; `=17,29` the entries 17 and 29, which are one then |
//! | `5 104+-1.5e0@1e0,2e0` | a new entry: value, place |
//! | `5 104-o` | nothing: start outside (`o`), out of evaluations (`b`), stalled (`s`), abandoned (`a`) |
//! | `c 42!i0~-1.5e0@1e0,2e0~0e0,3e0~1e-15~` | confirmed: kind (of `ibfk`), saddles, value, place, stiffness, residual, active slots |
//! | `c 42x` | dismissed |
//!
//! An arrival that is lower than all before has `<` in front of its mark, one at a kink `^`. Evaluations outside the landscape
//! follow as ` o3`, the first point with `@`, and fillings as ` f2/1` (tried/moved). Numbers are decimal and read back to
//! the same bits.

use std::fmt::{self, Write};
use std::str::FromStr;
use std::sync::Arc;

use crate::ledger::{Confirmed, EntryId, Kind};

use super::settings::Heuristic;
use super::task::Lost;

/// What the tasks of a round came to, in task order.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct RoundRecord {
    /// The next random number of the stream that the round was drawn from: another hunt, or another way to draw, has another.
    pub check: u32,
    /// One for each task.
    pub tasks: Vec<TaskRecord>,
}

/// What a task came to.
#[derive(Clone, Debug, PartialEq)]
pub struct TaskRecord {
    /// Evaluations spent.
    pub evaluations: u64,
    /// Those of them outside the landscape.
    pub outside: u64,
    /// The first point outside, where no earlier one is known.
    pub first_outside: Option<Vec<f64>>,
    /// Fillings that were tried, and those that moved a point.
    pub fillings: (u32, u32),
    /// On whose account; `None` for a confirmation.
    pub heuristic: Option<Heuristic>,
    /// What was found.
    pub found: Found,
}

/// What a task found, as the ledger sees it.
#[derive(Clone, Debug, PartialEq)]
pub enum Found {
    /// A new entry.
    New {
        /// The value.
        value: f64,
        /// The place.
        at: Arc<[f64]>,
        /// Whether it is at a kink.
        kinked: bool,
        /// Whether the value is lower than all before.
        lower: bool,
    },
    /// Entries that were known; several prove to be one.
    Known {
        /// Their numbers.
        same: Vec<EntryId>,
        /// Whether the arrival is at a kink.
        kinked: bool,
        /// Whether its value is lower than all before.
        lower: bool,
    },
    /// Nothing.
    Lost(Lost),
    /// A confirmation.
    Confirmed {
        /// The polished minimum.
        confirmed: Confirmed,
        /// Saddles left on the way.
        saddles: u64,
    },
    /// No minimum.
    Dismissed,
}

/// A text that is not the record of a round.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct BadRecord {
    /// The task, from 1, whose text is not understood; 0 where the check is not.
    pub task: usize,
}

impl fmt::Display for BadRecord {
    fn fmt(&self, out: &mut fmt::Formatter<'_>) -> fmt::Result {
        write!(out, "task {} of the round is not understood", self.task)
    }
}

impl std::error::Error for BadRecord {}

impl RoundRecord {
    /// The text of a round, without line breaks or quotation marks.
    ///
    /// ```
    /// use thalweg::search::RoundRecord;
    /// let text = "00c0ffee;1 104<+-1.5e0@1e0,-0e0;5 31=0 f2/1;2 7-o o7@inf,2e0;c 42x";
    /// assert_eq!(RoundRecord::read(text).unwrap().text(), text);
    /// assert_eq!(RoundRecord::read("00c0ffee;1 104=0;7 1=0").unwrap_err().task, 2);
    /// ```
    pub fn text(&self) -> String {
        let mut out = String::with_capacity(12 * self.tasks.len() + 8);
        let _ = write!(out, "{:08x}", self.check);
        for task in &self.tasks {
            out.push(';');
            // Writing to a string cannot fail.
            let _ = task.write(&mut out);
        }
        out
    }

    /// Reads the text of a round.
    ///
    /// # Errors
    /// [`BadRecord`] for the first task that is not understood.
    pub fn read(text: &str) -> Result<RoundRecord, BadRecord> {
        let mut parts = text.split(';');
        let check = parts.next().and_then(|check| u32::from_str_radix(check, 16).ok()).ok_or(BadRecord { task: 0 })?;
        let read = |(number, text)| TaskRecord::read(text).ok_or(BadRecord { task: number + 1 });
        Ok(RoundRecord { check, tasks: parts.enumerate().map(read).collect::<Result<_, _>>()? })
    }
}

impl TaskRecord {
    fn write(&self, out: &mut String) -> fmt::Result {
        match self.heuristic {
            Some(heuristic) => write!(out, "{} {}", heuristic.number(), self.evaluations)?,
            None => write!(out, "c {}", self.evaluations)?,
        }
        let marks = |out: &mut String, lower: bool, kinked: bool| {
            out.push_str(if lower { "<" } else { "" });
            out.push_str(if kinked { "^" } else { "" });
        };
        match &self.found {
            Found::New { value, at, kinked, lower } => {
                marks(out, *lower, *kinked);
                write!(out, "+{value:e}@")?;
                write_all(out, at, |out, number| write!(out, "{number:e}"))?;
            }
            Found::Known { same, kinked, lower } => {
                marks(out, *lower, *kinked);
                out.push('=');
                write_all(out, same, |out, entry| write!(out, "{}", entry.0))?;
            }
            Found::Lost(lost) => {
                out.push('-');
                out.push(letter(&LOST, *lost));
            }
            Found::Confirmed { confirmed, saddles } => {
                write!(out, "!{}{saddles}~{:e}@", letter(&KINDS, confirmed.kind), confirmed.value)?;
                write_all(out, &confirmed.at, |out, number| write!(out, "{number:e}"))?;
                out.push('~');
                write_all(out, &confirmed.stiffness, |out, number| write!(out, "{number:e}"))?;
                write!(out, "~{:e}~", confirmed.residual)?;
                write_all(out, &confirmed.active, |out, slot| write!(out, "{slot}"))?;
            }
            Found::Dismissed => out.push('x'),
        }
        if self.outside > 0 {
            write!(out, " o{}", self.outside)?;
            if let Some(first) = &self.first_outside {
                out.push('@');
                write_all(out, first, |out, number| write!(out, "{number:e}"))?;
            }
        }
        match self.fillings {
            (0, 0) => Ok(()),
            (tried, moved) => write!(out, " f{tried}/{moved}"),
        }
    }

    fn read(text: &str) -> Option<TaskRecord> {
        let mut parts = text.split(' ');
        let heuristic = match parts.next()? {
            "c" => None,
            number => Some(*Heuristic::ALL.get(number.parse::<usize>().ok()?)?),
        };
        let main = parts.next()?;
        let (evaluations, found) = main.split_at(main.find(|letter: char| !letter.is_ascii_digit())?);
        let found = read_found(found)?;
        let is_confirmation = matches!(found, Found::Confirmed { .. } | Found::Dismissed);
        if is_confirmation != heuristic.is_none() {
            return None;
        }
        let mut task = TaskRecord {
            evaluations: evaluations.parse().ok()?,
            outside: 0,
            first_outside: None,
            fillings: (0, 0),
            heuristic,
            found,
        };
        for part in parts {
            let (kind, rest) = (part.get(..1)?, part.get(1..)?);
            match (kind, rest.split_once('@'), rest.split_once('/')) {
                ("o", Some((count, first)), _) => {
                    (task.outside, task.first_outside) = (count.parse().ok()?, Some(read_all(first)?));
                }
                ("o", None, _) => task.outside = rest.parse().ok()?,
                ("f", _, Some((tried, moved))) => task.fillings = (tried.parse().ok()?, moved.parse().ok()?),
                _ => return None,
            }
        }
        Some(task)
    }
}

const LOST: [(char, Lost); 4] =
    [('o', Lost::Outside), ('b', Lost::OutOfBudget), ('s', Lost::Stalled), ('a', Lost::Abandoned)];

const KINDS: [(char, Kind); 4] = [('i', Kind::Interior), ('b', Kind::Bound), ('f', Kind::Flat), ('k', Kind::Kinked)];

/// The letter of a thing; every one has its own.
fn letter<T: PartialEq>(letters: &[(char, T)], wanted: T) -> char {
    letters.iter().find(|(_, thing)| *thing == wanted).map_or('?', |&(letter, _)| letter)
}

fn of_letter<T: Copy>(letters: &[(char, T)], text: &str) -> Option<T> {
    let mut characters = text.chars();
    let wanted = characters.next().filter(|_| characters.as_str().is_empty())?;
    letters.iter().find(|&&(letter, _)| letter == wanted).map(|&(_, thing)| thing)
}

fn read_found(text: &str) -> Option<Found> {
    let (lower, text) = text.strip_prefix('<').map_or((false, text), |text| (true, text));
    let (kinked, text) = text.strip_prefix('^').map_or((false, text), |text| (true, text));
    let rest = text.get(1..)?;
    match text.get(..1)? {
        "+" => {
            let (value, at) = rest.split_once('@')?;
            Some(Found::New { value: value.parse().ok()?, at: read_all(at)?.into(), kinked, lower })
        }
        "=" => {
            let same: Vec<EntryId> = read_all(rest)?.into_iter().map(EntryId).collect();
            (!same.is_empty()).then_some(Found::Known { same, kinked, lower })
        }
        _ if lower || kinked => None,
        "-" => Some(Found::Lost(of_letter(&LOST, rest)?)),
        "x" => rest.is_empty().then_some(Found::Dismissed),
        "!" => {
            let mut parts = rest.split('~');
            let head = parts.next()?;
            let (value, at) = parts.next()?.split_once('@')?;
            let confirmed = Confirmed {
                kind: of_letter(&KINDS, head.get(..1)?)?,
                value: value.parse().ok()?,
                at: read_all(at)?.into(),
                stiffness: read_all(parts.next()?)?,
                residual: parts.next()?.parse().ok()?,
                active: read_all(parts.next()?)?,
            };
            let saddles = head.get(1..)?.parse().ok()?;
            parts.next().is_none().then_some(Found::Confirmed { confirmed, saddles })
        }
        _ => None,
    }
}

fn write_all<T>(out: &mut String, items: &[T], write: impl Fn(&mut String, &T) -> fmt::Result) -> fmt::Result {
    for (number, item) in items.iter().enumerate() {
        if number > 0 {
            out.push(',');
        }
        write(out, item)?;
    }
    Ok(())
}

fn read_all<T: FromStr>(text: &str) -> Option<Vec<T>> {
    if text.is_empty() { Some(Vec::new()) } else { text.split(',').map(|item| item.parse().ok()).collect() }
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    fn number() -> impl Strategy<Value = f64> {
        prop_oneof![any::<f64>().prop_filter("NaN has no one pattern", |x| !x.is_nan()), Just(0.1), Just(-0.0)]
    }

    fn numbers() -> impl Strategy<Value = Vec<f64>> {
        proptest::collection::vec(number(), 0..4)
    }

    fn found() -> impl Strategy<Value = Found> {
        let kinds = proptest::sample::select(KINDS.map(|(_, kind)| kind).to_vec());
        let confirmed = (kinds, number(), numbers(), numbers(), number(), 0..3_usize).prop_map(
            |(kind, value, at, stiffness, residual, n_active)| Confirmed {
                kind,
                value,
                at: at.into(),
                stiffness,
                residual,
                active: (0..n_active).collect(),
            },
        );
        let (number, place) = (number(), numbers());
        prop_oneof![
            (number, place, any::<bool>(), any::<bool>()).prop_map(|(value, at, kinked, lower)| Found::New {
                value,
                at: at.into(),
                kinked,
                lower
            }),
            (proptest::collection::vec(any::<u32>(), 1..4), any::<bool>(), any::<bool>()).prop_map(
                |(same, kinked, lower)| Found::Known { same: same.into_iter().map(EntryId).collect(), kinked, lower }
            ),
            proptest::sample::select(LOST.map(|(_, lost)| lost).to_vec()).prop_map(Found::Lost),
            (confirmed, any::<u64>()).prop_map(|(confirmed, saddles)| Found::Confirmed { confirmed, saddles }),
            Just(Found::Dismissed),
        ]
    }

    proptest! {
        #![proptest_config(ProptestConfig::with_cases(400))]
        #[test]
        fn records_read_back_to_the_same_bits(
            found in proptest::collection::vec(found(), 0..4),
            evaluations: u64, check: u32, outside in 0..3_u64, first in proptest::option::of(numbers()), fillings: (u32, u32),
            member in 0..Heuristic::ALL.len(),
        ) {
            let tasks = found.into_iter().map(|found| TaskRecord {
                evaluations,
                outside,
                first_outside: first.clone().filter(|_| outside > 0),
                fillings,
                heuristic: (!matches!(found, Found::Confirmed { .. } | Found::Dismissed))
                    .then_some(Heuristic::ALL[member]),
                found,
            });
            let record = RoundRecord { check, tasks: tasks.collect() };
            let text = record.text();
            let again = RoundRecord::read(&text).unwrap();
            prop_assert_eq!(&again, &record);
            // Equal numbers may differ in the sign of zero; equal texts do not.
            prop_assert_eq!(again.text(), text);
        }
    }

    /// Whatever a text is, reading it never fails otherwise than by saying so.
    #[test]
    fn every_piece_of_a_text_is_read_or_refused() {
        let text =
            "00000007;1 104<^+-1.5e0@1e0,-0e0 o7@inf,2e0 f2/1;c 42!i0~-1.5e0@1e0~0e0~1e-15~3;c 42x;2 7-o;5 31=0,4";
        assert_eq!(RoundRecord::read(text).unwrap().text(), text);
        for end in 1..text.len() {
            let _ = RoundRecord::read(&text[..end]);
            let _ = RoundRecord::read(&text[end..]);
        }
    }
}
