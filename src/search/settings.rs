//! What a hunt is asked to do.

use std::fmt;

/// Who proposed a point.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub enum Heuristic {
    /// Points that the user already had.
    Given,
    /// Independent uniform starts, the only unbiased sample of basins.
    Survey,
    /// Uniform and low-discrepancy starts.
    Multistart,
    /// Chains that accept rises by temperature and cool, each closed by a descent.
    Anneal,
    /// A population of minima whose children descend.
    Evolve,
    /// Perturb a minimum, descend, accept by temperature.
    Hop,
}

impl Heuristic {
    /// Every one, in the order of its number.
    pub const ALL: [Heuristic; 6] = [
        Heuristic::Given,
        Heuristic::Survey,
        Heuristic::Multistart,
        Heuristic::Anneal,
        Heuristic::Evolve,
        Heuristic::Hop,
    ];

    /// Those that a mix may name.
    pub const MEMBERS: [Heuristic; 4] = [Heuristic::Multistart, Heuristic::Anneal, Heuristic::Evolve, Heuristic::Hop];

    /// The name on the command line and in files.
    pub fn name(self) -> &'static str {
        match self {
            Heuristic::Given => "given",
            Heuristic::Survey => "survey",
            Heuristic::Multistart => "multistart",
            Heuristic::Anneal => "anneal",
            Heuristic::Evolve => "evolve",
            Heuristic::Hop => "hop",
        }
    }

    /// The member of a mix with this name.
    pub fn member(name: &str) -> Option<Self> {
        Heuristic::MEMBERS.into_iter().find(|member| member.name() == name)
    }

    /// Its place in [`Heuristic::ALL`].
    pub fn number(self) -> usize {
        self as usize
    }
}

/// The heuristics of a hunt, each with its share of what the survey leaves.
#[derive(Clone, Debug, PartialEq)]
pub struct Mix {
    members: Vec<(Heuristic, f64)>,
    fixed: bool,
}

/// Why a mix was refused.
#[derive(Clone, Debug, PartialEq)]
pub enum MixError {
    /// No heuristic has this name.
    Unknown(String),
    /// The heuristic is named twice.
    Repeated(Heuristic),
    /// No heuristic is named.
    Empty,
    /// The share is not a positive number.
    BadShare(String),
}

impl fmt::Display for MixError {
    fn fmt(&self, out: &mut fmt::Formatter<'_>) -> fmt::Result {
        let known = Heuristic::MEMBERS.map(Heuristic::name).join(", ");
        match self {
            MixError::Unknown(name) => write!(out, "there is no heuristic `{name}`; there are {known}"),
            MixError::Repeated(heuristic) => write!(out, "`{}` is named twice", heuristic.name()),
            MixError::Empty => write!(out, "name at least one heuristic of {known}"),
            MixError::BadShare(text) => write!(out, "the share `{text}` is not a positive number"),
        }
    }
}

impl std::error::Error for MixError {}

impl Mix {
    /// Reads `multistart,hop` or `hop:0.7,multistart:0.3`. Without any number the shares follow what the members earn,
    /// and begin equal; with one they stay as they are given, a missing one being 1. All are scaled to sum 1.
    ///
    /// ```
    /// use thalweg::search::{Heuristic, Mix};
    /// let mix = Mix::read("hop:3,multistart").unwrap();
    /// assert_eq!(mix.members(), [(Heuristic::Hop, 0.75), (Heuristic::Multistart, 0.25)]);
    /// assert!(mix.is_fixed() && !Mix::read("hop,evolve").unwrap().is_fixed());
    /// assert!(Mix::read("jump").is_err());
    /// ```
    ///
    /// # Errors
    /// A [`MixError`] for an unknown or repeated name, an empty list, or a share that is not a positive number.
    pub fn read(text: &str) -> Result<Mix, MixError> {
        let mut members: Vec<(Heuristic, f64)> = Vec::new();
        let mut fixed = false;
        for part in text.split(',').map(str::trim).filter(|part| !part.is_empty()) {
            let (name, share) = match part.split_once(':') {
                None => (part, 1.0),
                Some((name, share)) => {
                    fixed = true;
                    let number = share.trim().parse().ok().filter(|&number: &f64| number > 0.0 && number.is_finite());
                    (name.trim(), number.ok_or_else(|| MixError::BadShare(share.trim().to_string()))?)
                }
            };
            let heuristic = Heuristic::member(name).ok_or_else(|| MixError::Unknown(name.to_string()))?;
            if members.iter().any(|&(other, _)| other == heuristic) {
                return Err(MixError::Repeated(heuristic));
            }
            members.push((heuristic, share));
        }
        let total: f64 = members.iter().map(|member| member.1).sum();
        if members.is_empty() {
            return Err(MixError::Empty);
        }
        members.iter_mut().for_each(|member| member.1 /= total);
        Ok(Mix { members, fixed })
    }

    /// A mix as [`Mix::members`] and [`Mix::is_fixed`] told it; nothing is scaled, so that it is the same to the last bit.
    ///
    /// # Errors
    /// A [`MixError`] for a heuristic that is no member, an empty list, or a share that is not a positive number.
    pub fn restored(members: Vec<(Heuristic, f64)>, fixed: bool) -> Result<Mix, MixError> {
        if members.is_empty() {
            return Err(MixError::Empty);
        }
        for (number, &(heuristic, share)) in members.iter().enumerate() {
            if !Heuristic::MEMBERS.contains(&heuristic) {
                return Err(MixError::Unknown(heuristic.name().to_string()));
            }
            if members[..number].iter().any(|&(other, _)| other == heuristic) {
                return Err(MixError::Repeated(heuristic));
            }
            if !(share > 0.0 && share.is_finite()) {
                return Err(MixError::BadShare(share.to_string()));
            }
        }
        Ok(Mix { members, fixed })
    }

    /// Whether the shares stay as they are.
    pub fn is_fixed(&self) -> bool {
        self.fixed
    }

    /// The members with their shares at the beginning, which sum to 1.
    pub fn members(&self) -> &[(Heuristic, f64)] {
        &self.members
    }
}

impl Default for Mix {
    /// All four, mostly `hop` at the beginning; then what they earn decides.
    fn default() -> Self {
        let members = vec![
            (Heuristic::Multistart, 0.03),
            (Heuristic::Anneal, 0.01),
            (Heuristic::Evolve, 0.08),
            (Heuristic::Hop, 0.79),
        ];
        Mix { members, fixed: false }
    }
}

impl fmt::Display for Mix {
    fn fmt(&self, out: &mut fmt::Formatter<'_>) -> fmt::Result {
        for (k, (heuristic, share)) in self.members.iter().enumerate() {
            let comma = if k == 0 { "" } else { "," };
            write!(out, "{comma}{}:{share}", heuristic.name())?;
        }
        Ok(())
    }
}

/// The settings that decide the bits of a hunt, and nothing else: threads and wall clock are not among them.
#[derive(Clone, Debug, PartialEq)]
pub struct Settings {
    /// The seed of every random stream.
    pub seed: u64,
    /// The heuristics and their shares.
    pub mix: Mix,
    /// The share of all evaluations that goes to the survey, from 0 to 1.
    pub survey: f64,
    /// The hunt ends after the round in which this many evaluations are reached.
    pub max_evaluations: Option<u64>,
    /// The hunt ends after the round in which a value at or below this is met (of the minimised objective).
    pub target: Option<f64>,
    /// The hunt ends after the round in which the survey's coverage reaches this share with 95 % confidence: when the lower
    /// end of its interval does.
    pub coverage: Option<f64>,
    /// The hunt ends after the round in which so many evaluations have passed without a lower value.
    pub quiet: Option<u64>,
    /// Points to descend from first.
    pub given: Vec<Vec<f64>>,
}

impl Default for Settings {
    fn default() -> Self {
        Settings {
            seed: 1,
            mix: Mix::default(),
            survey: 0.2,
            max_evaluations: None,
            target: None,
            coverage: None,
            quiet: None,
            given: Vec::new(),
        }
    }
}
