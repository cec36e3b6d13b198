//! `status.json`: where a hunt stands, for scripts and for whoever looks on.

use std::collections::BTreeMap;

use serde::{Deserialize, Serialize};

use super::minima_file::Format;

/// The whole file: one object, replaced about every second and at the end.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Status {
    /// `thalweg status`, version 1.
    pub format: Format,
    /// `hunting`, or `ended`; a hunt that was killed says `hunting`, but no process holds its lock.
    pub state: String,
    /// Why it ended, in the words of `run.json`.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub reason: Option<String>,
    /// Seconds so far, those of earlier sessions included.
    pub seconds: f64,
    /// The seconds allowed.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub allowed_seconds: Option<u64>,
    /// Evaluations so far.
    pub evaluations: u64,
    /// The evaluations allowed.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub allowed_evaluations: Option<u64>,
    /// Evaluations a second, over this session.
    pub evaluations_a_second: f64,
    /// The lowest value so far.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub lowest: Option<StatusLowest>,
    /// Whether the value is to be as high as possible, and `lowest` is the highest.
    pub maximise: bool,
    /// Distinct minima so far.
    pub distinct: u64,
    /// Those of them that are confirmed.
    pub confirmed: u64,
    /// Evaluations so far by heuristic.
    pub by_heuristic: BTreeMap<String, u64>,
    /// Evaluations outside the landscape.
    pub outside: u64,
    /// Why files cannot be written at the moment.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub fault: Option<String>,
}

/// The lowest value of a status.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct StatusLowest {
    /// The value, as written.
    pub value: f64,
    /// Who met it.
    pub heuristic: String,
    /// After how many evaluations.
    pub evaluation: u64,
}

/// The format of `status.json`.
pub fn status_format() -> Format {
    Format { name: "thalweg status".to_string(), version: 1 }
}
