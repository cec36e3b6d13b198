//! The entries: recognised by value, then by invariants, then by an explicit match.

use std::collections::{BTreeMap, BTreeSet};
use std::sync::Arc;

use crate::base::order::Total;

use super::entry::{Candidate, Confirmed, Entry, EntryId, MAX_HEURISTICS, Meeting, Record};
use super::identity::{Fingerprint, Identity, Match, Tolerances};

/// What came of meeting a candidate.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Met {
    /// Its entry.
    pub entry: EntryId,
    /// Whether the entry is new.
    pub new: bool,
}

/// Two entries that are distinct, but only just.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct NearTwins {
    /// The lower one.
    pub first: EntryId,
    /// The other.
    pub second: EntryId,
    /// The difference of their values.
    pub value_difference: f64,
    /// The largest deviation after the best match, in units; infinite beyond ten tolerances.
    pub deviation: f64,
}

/// The minima met so far.
///
/// Entries are connected components: two arrivals are in one entry when a chain of arrivals, each the same as the next,
/// joins them. The representative is the earliest arrival by round and task. So the order of insertion does not matter.
#[derive(Clone, Debug)]
pub struct Ledger {
    identity: Arc<Identity>,
    tolerances: Tolerances,
    value_scale: f64,
    records: Vec<Option<Record>>,
    /// Where a number leads that was merged into another.
    merged: Vec<u32>,
    by_value: BTreeSet<(Total, u32)>,
    /// By the number of the fingerprint: the better key where many entries share a value.
    by_number: BTreeSet<(Total, u32)>,
    /// Valleys, by value: an arrival anywhere in one belongs to it.
    flat: BTreeSet<(Total, u32)>,
    n_looks: u64,
    waiting: BTreeSet<(Total, u32)>,
    n_confirmed: usize,
    dismissed: u64,
    /// Whether any arrival ended at a kink; values are then compared more widely.
    has_kinks: bool,
}

impl Ledger {
    /// An empty ledger. `value_scale` is the size of ordinary values of the landscape: values near 0 are told apart
    /// relative to a millionth of it.
    pub fn new(identity: Arc<Identity>, value_scale: f64) -> Self {
        Ledger {
            identity,
            tolerances: Tolerances::default(),
            value_scale: if value_scale.is_finite() { value_scale.abs() } else { 0.0 },
            records: Vec::new(),
            merged: Vec::new(),
            by_value: BTreeSet::new(),
            by_number: BTreeSet::new(),
            flat: BTreeSet::new(),
            n_looks: 0,
            waiting: BTreeSet::new(),
            n_confirmed: 0,
            dismissed: 0,
            has_kinks: false,
        }
    }

    /// What decides whether two points are the same.
    pub fn identity(&self) -> &Identity {
        &self.identity
    }

    /// The tolerances.
    pub fn tolerances(&self) -> Tolerances {
        self.tolerances
    }

    /// Takes in a converged descent: [`Ledger::recognise`], then what follows from it.
    pub fn meet(&mut self, candidate: Candidate, meeting: Meeting) -> Met {
        let same = self.recognise(&candidate);
        let Some(&first) = same.first() else { return Met { entry: self.admit(candidate, meeting), new: true } };
        let is_later = |entry: &EntryId| self.entry(*entry).is_some_and(|entry| entry.first().key() < meeting.key());
        if same.iter().all(is_later) {
            return Met { entry: self.count(&same, candidate.kinked, meeting).unwrap_or(first), new: false };
        }
        // Arrivals out of order: this one may have to represent the entry.
        let id = self.admit(candidate, meeting);
        Met { entry: same.into_iter().fold(id, |left, right| self.merge(left, right)), new: false }
    }

    /// The entries that a converged descent is the same as; none means that it is new.
    pub fn recognise(&mut self, candidate: &Candidate) -> Vec<EntryId> {
        self.same_as(&Look {
            value: candidate.value + 0.0,
            at: &candidate.at,
            fingerprint: &candidate.fingerprint,
            kinked: candidate.kinked,
            confirmed: None,
        })
    }

    /// A new entry for a converged descent that was recognised as none of the entries.
    pub fn admit(&mut self, candidate: Candidate, meeting: Meeting) -> EntryId {
        self.has_kinks |= candidate.kinked;
        let number = self.records.len() as u32;
        self.records.push(None);
        self.merged.push(number);
        let mut hits = [0; MAX_HEURISTICS];
        hits[meeting.heuristic.min(MAX_HEURISTICS - 1)] = 1;
        let record = Record {
            // -0 stands below 0 in the order of keys.
            value: candidate.value + 0.0,
            at: candidate.at,
            fingerprint: candidate.fingerprint,
            kinked: candidate.kinked,
            first: meeting,
            hits,
            confirmed: None,
        };
        self.insert(number, record);
        EntryId(number)
    }

    /// Counts a converged descent, later than all before, that was recognised as these entries; several become one.
    /// `None` where there is no such entry.
    pub fn count(&mut self, same: &[EntryId], kinked: bool, meeting: Meeting) -> Option<EntryId> {
        self.has_kinks |= kinked;
        let (&first, others) = same.split_first()?;
        let entry = others.iter().fold(first, |left, &right| self.merge(left, right));
        let number = self.resolve(entry)?;
        if !kinked && self.records[number as usize].as_ref().is_some_and(|record| record.kinked) {
            // It can be confirmed after all.
            let mut record = self.remove(number)?;
            record.kinked = false;
            self.insert(number, record);
        }
        let record = self.records[number as usize].as_mut()?;
        record.hits[meeting.heuristic.min(MAX_HEURISTICS - 1)] += 1;
        Some(EntryId(number))
    }

    /// The polish of an entry. If it then proves the same as others, they become one.
    pub fn confirm(&mut self, entry: EntryId, confirmed: Confirmed) {
        let Some(number) = self.resolve(entry) else { return };
        let Some(mut record) = self.remove(number) else { return };
        record.value = confirmed.value;
        record.at = confirmed.at.clone();
        record.fingerprint = self.identity.fingerprint(&record.at);
        record.confirmed = Some(confirmed);
        let same = self.same_as(&Look::of(&record));
        self.insert(number, record);
        same.into_iter().fold(EntryId(number), |left, right| self.merge(left, right));
    }

    /// An entry that is no minimum after all.
    pub fn dismiss(&mut self, entry: EntryId) {
        if let Some(number) = self.resolve(entry)
            && let Some(record) = self.remove(number)
        {
            self.dismissed += record.hits.iter().sum::<u64>();
        }
    }

    /// Arrivals whose entries were dismissed.
    pub fn dismissed(&self) -> u64 {
        self.dismissed
    }

    /// How many entries there are.
    pub fn len(&self) -> usize {
        self.by_value.len()
    }

    /// How many entries were looked at so far to find out whether arrivals are new: what meeting costs.
    pub fn n_looks(&self) -> u64 {
        self.n_looks
    }

    /// Whether there are none.
    pub fn is_empty(&self) -> bool {
        self.by_value.is_empty()
    }

    /// How many entries are confirmed.
    pub fn n_confirmed(&self) -> usize {
        self.n_confirmed
    }

    /// The entries, lowest first; of equal values the one met earlier.
    pub fn entries(&self) -> impl Iterator<Item = Entry<'_>> {
        self.by_value.iter().filter_map(|&(_, number)| self.entry(EntryId(number)))
    }

    /// An entry by its number; `None` when it was dismissed.
    pub fn entry(&self, id: EntryId) -> Option<Entry<'_>> {
        let number = self.resolve(id)?;
        let record = self.records[number as usize].as_ref()?;
        Some(Entry { id: EntryId(number), record })
    }

    /// The lowest value.
    pub fn lowest_value(&self) -> Option<f64> {
        self.by_value.first().map(|&(Total(value), _)| value)
    }

    /// The lowest entry.
    pub fn lowest_entry(&self) -> Option<EntryId> {
        self.by_value.first().map(|&(_, number)| EntryId(number))
    }

    /// The place of an entry.
    pub fn point(&self, id: EntryId) -> Option<Arc<[f64]>> {
        let number = self.resolve(id)?;
        self.records[number as usize].as_ref().map(|record| record.at.clone())
    }

    /// Whether an entry is confirmed.
    pub fn is_confirmed(&self, id: EntryId) -> bool {
        self.entry(id).is_some_and(|entry| entry.confirmed().is_some())
    }

    /// Entries that wait to be confirmed, lowest first, `most` at most.
    pub fn unconfirmed(&self, most: usize) -> Vec<EntryId> {
        self.waiting.iter().take(most).map(|&(_, number)| EntryId(number)).collect()
    }

    /// Pairs of entries that fall within ten times the tolerances and are distinct.
    pub fn near_twins(&self) -> Vec<NearTwins> {
        let mut twins = Vec::new();
        let near = self.tolerances.near;
        for left in self.entries() {
            let reach = near * self.value_tolerance(left.value(), left.record.kinked);
            let above =
                self.by_value.range((Total(left.value()), left.id.0 + 1)..=(Total(left.value() + reach), u32::MAX));
            // A landscape with hundreds of equal values (independent equal wells) has as many pairs; a few tell it.
            for &(_, number) in above.take(200) {
                let Some(right) = self.entry(EntryId(number)) else { continue };
                let place = near * self.place_tolerance(left.record.kinked || right.record.kinked);
                if !self.identity.alike(&left.record.fingerprint, &right.record.fingerprint, place) {
                    continue;
                }
                if let Match::Same(deviation) | Match::Near(deviation) =
                    self.identity.compare(left.at(), right.at(), 0.0, place)
                {
                    let value_difference = right.value() - left.value();
                    twins.push(NearTwins { first: left.id, second: right.id, value_difference, deviation });
                }
            }
        }
        twins
    }

    fn value_tolerance(&self, value: f64, kinked: bool) -> f64 {
        let factor = if kinked { self.tolerances.kinked } else { 1.0 };
        factor * self.tolerances.value * value.abs().max(1e-6 * self.value_scale)
    }

    fn place_tolerance(&self, kinked: bool) -> f64 {
        if kinked { self.tolerances.kinked.min(100.0) * self.tolerances.place } else { self.tolerances.place }
    }

    /// The entries that an arrival is the same as.
    fn same_as(&mut self, record: &Look<'_>) -> Vec<EntryId> {
        let kinked = record.kinked || self.has_kinks;
        let reach = self.value_tolerance(record.value, kinked);
        let around = |middle: f64, reach: f64| (Total(middle - reach), 0)..=(Total(middle + reach), u32::MAX);
        let values = around(record.value, reach);
        let candidates = if record.is_flat() {
            self.by_value.range(values).map(|&(_, number)| number).collect()
        } else {
            let slack = self.identity.slack(self.place_tolerance(kinked));
            let numbers = around(record.fingerprint.number(), slack);
            let mut fewer = shorter(self.by_value.range(values.clone()), self.by_number.range(numbers));
            fewer.extend(self.flat.range(values).map(|&(_, number)| number));
            fewer.sort_unstable();
            fewer.dedup();
            fewer
        };
        self.n_looks += candidates.len() as u64;
        candidates.into_iter().filter(|&number| self.is_same(record, number)).map(EntryId).collect()
    }

    fn is_same(&self, record: &Look<'_>, number: u32) -> bool {
        let Some(other) = &self.records[number as usize] else { return false };
        let kinked = record.kinked || other.kinked;
        if (record.value - other.value).abs() > self.value_tolerance(record.value, kinked) {
            return false;
        }
        if record.is_flat() || is_flat(other) {
            // A valley is one answer: along it every place has the same value.
            return true;
        }
        if let (Some(a), Some(b)) = (record.confirmed, &other.confirmed)
            && !same_spectrum(&a.stiffness, &b.stiffness)
        {
            return false;
        }
        let place = self.place_tolerance(kinked);
        self.identity.alike(record.fingerprint, &other.fingerprint, place)
            && matches!(self.identity.compare(&other.at, record.at, place, place), Match::Same(_))
    }

    fn resolve(&self, id: EntryId) -> Option<u32> {
        let mut number = id.0;
        while *self.merged.get(number as usize)? != number {
            number = self.merged[number as usize];
        }
        Some(number)
    }

    fn insert(&mut self, number: u32, record: Record) {
        let key = (Total(record.value), number);
        self.by_value.insert(key);
        self.by_number.insert((Total(record.fingerprint.number()), number));
        if is_flat(&record) {
            self.flat.insert(key);
        }
        if record.confirmed.is_some() {
            self.n_confirmed += 1;
        } else if !record.kinked {
            self.waiting.insert(key);
        }
        self.records[number as usize] = Some(record);
    }

    fn remove(&mut self, number: u32) -> Option<Record> {
        let record = self.records[number as usize].take()?;
        let key = (Total(record.value), number);
        self.by_value.remove(&key);
        self.by_number.remove(&(Total(record.fingerprint.number()), number));
        self.flat.remove(&key);
        self.waiting.remove(&key);
        self.n_confirmed -= usize::from(record.confirmed.is_some());
        Some(record)
    }

    /// Makes two entries one, under the older number: the earlier arrival represents it, and a polish stays.
    fn merge(&mut self, left: EntryId, right: EntryId) -> EntryId {
        let (Some(left), Some(right)) = (self.resolve(left), self.resolve(right)) else { return left };
        if left == right {
            return EntryId(left);
        }
        let (kept, gone) = (left.min(right), left.max(right));
        let (Some(mut a), Some(b)) = (self.remove(kept), self.remove(gone)) else { return EntryId(kept) };
        self.merged[gone as usize] = kept;
        a.hits.iter_mut().zip(b.hits).for_each(|(hits, more)| *hits += more);
        let b_first = b.first.key() < a.first.key();
        let polish = match (&a.confirmed, &b.confirmed) {
            (Some(_), None) => false,
            (None, Some(_)) => true,
            _ => b_first,
        };
        if polish {
            (a.value, a.at, a.fingerprint, a.confirmed) = (b.value, b.at, b.fingerprint, b.confirmed);
        }
        if b_first {
            a.first = b.first;
        }
        a.kinked &= b.kinked;
        self.insert(kept, a);
        EntryId(kept)
    }
}

/// What is compared with the entries.
struct Look<'a> {
    value: f64,
    at: &'a [f64],
    fingerprint: &'a Fingerprint,
    kinked: bool,
    confirmed: Option<&'a Confirmed>,
}

impl<'a> Look<'a> {
    fn of(record: &'a Record) -> Self {
        Look {
            value: record.value,
            at: &record.at,
            fingerprint: &record.fingerprint,
            kinked: record.kinked,
            confirmed: record.confirmed.as_ref(),
        }
    }

    fn is_flat(&self) -> bool {
        self.confirmed.is_some_and(Confirmed::is_flat)
    }
}

fn is_flat(record: &Record) -> bool {
    record.confirmed.as_ref().is_some_and(Confirmed::is_flat)
}

/// What the shorter of two ranges holds, found in the time that takes.
fn shorter<'a>(
    mut left: impl Iterator<Item = &'a (Total, u32)>,
    mut right: impl Iterator<Item = &'a (Total, u32)>,
) -> Vec<u32> {
    let (mut of_left, mut of_right) = (Vec::new(), Vec::new());
    loop {
        match left.next() {
            Some(&(_, number)) => of_left.push(number),
            None => return of_left,
        }
        match right.next() {
            Some(&(_, number)) => of_right.push(number),
            None => return of_right,
        }
    }
}

/// Spectra agree when every stiffness does, relative to the stiffest: they are met at points 1e-7 apart.
fn same_spectrum(left: &[f64], right: &[f64]) -> bool {
    let most = left.iter().chain(right).fold(0.0, |most: f64, x| most.max(x.abs()));
    left.len() == right.len() && left.iter().zip(right).all(|(a, b)| (a - b).abs() <= 1e-4 * most)
}

/// The counts of the entries by a heuristic, for estimates: how many entries it met so often.
impl Ledger {
    /// For each number of hits by a heuristic, how many entries have it.
    pub fn frequencies(&self, heuristic: usize) -> BTreeMap<u64, u64> {
        let mut frequencies = BTreeMap::new();
        for hits in self.entries().map(|entry| entry.hits(heuristic)).filter(|&hits| hits > 0) {
            *frequencies.entry(hits).or_default() += 1;
        }
        frequencies
    }
}
