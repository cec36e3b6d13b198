//! Whose turn it is: shares of evaluations kept by largest deficit.
//!
//! Shares are of evaluations, not of tasks, since a hop costs fewer of them than a descent from a uniform start. What
//! is under way counts with its expected cost, so that a round does not give every place to the same heuristic.

use super::settings::{Heuristic, Mix};

const COUNT: usize = Heuristic::ALL.len();

/// The account of evaluations by heuristic.
#[derive(Clone, Debug)]
pub struct Schedule {
    share: [f64; COUNT],
    /// Evaluations that are due to each: its share of all so far, less its own.
    due: [f64; COUNT],
    spent: [u64; COUNT],
    descents: [u64; COUNT],
    pending: [u64; COUNT],
    /// Evaluations that the tasks under way were booked with, and how many tasks those are.
    booked: [f64; COUNT],
    expected: [Option<f64>; COUNT],
}

impl Schedule {
    /// An account in which the survey has the given share and the mix the rest.
    pub fn new(mix: &Mix, survey: f64) -> Self {
        let zeros = [0.0; COUNT];
        let mut schedule = Schedule {
            share: zeros,
            due: zeros,
            spent: [0; COUNT],
            descents: [0; COUNT],
            pending: [0; COUNT],
            booked: zeros,
            expected: [None; COUNT],
        };
        let shares: Vec<f64> = mix.members().iter().map(|member| member.1).collect();
        schedule.set_shares(mix, survey, &shares);
        schedule
    }

    /// Other shares for the members of a mix from now on; what was spent before is not made up for.
    pub fn set_shares(&mut self, mix: &Mix, survey: f64, shares: &[f64]) {
        self.share[Heuristic::Survey.number()] = survey;
        for (&(heuristic, _), share) in mix.members().iter().zip(shares) {
            self.share[heuristic.number()] = share * (1.0 - survey);
        }
    }

    /// The shares now, in the order of [`Heuristic::ALL`].
    pub fn shares(&self) -> [f64; COUNT] {
        self.share
    }

    /// The heuristic whose next task would be paid for by its share soonest, counting what is under way (weighted fair
    /// queueing, Demers, Keshav and Shenker 1989); ties go to the first. Hence a costly task of a heuristic with a small
    /// share waits until the hunt has grown to it.
    pub fn next(&self) -> Heuristic {
        let mut best = (f64::INFINITY, Heuristic::Survey);
        for heuristic in Heuristic::ALL.into_iter().filter(|heuristic| self.share[heuristic.number()] > 0.0) {
            let number = heuristic.number();
            let wait = (self.usual_cost(heuristic) - self.due[number]) / self.share[number];
            if wait < best.0 {
                best = (wait, heuristic);
            }
        }
        best.1
    }

    /// What a task of the heuristic will cost, while none has ended.
    pub fn expect(&mut self, heuristic: Heuristic, evaluations: f64) {
        self.expected[heuristic.number()] = Some(evaluations);
    }

    /// A task of the heuristic is under way.
    pub fn begin(&mut self, heuristic: Heuristic) {
        let cost = self.usual_cost(heuristic);
        self.pending[heuristic.number()] += 1;
        self.booked[heuristic.number()] += cost;
        self.book(heuristic, cost);
    }

    /// A task of the heuristic has ended.
    pub fn end(&mut self, heuristic: Heuristic, evaluations: u64) {
        let number = heuristic.number();
        // The mean of what is booked: tasks under way are not told apart.
        let booked = self.booked[number] / self.pending[number].max(1) as f64;
        self.booked[number] -= booked;
        self.pending[number] -= 1;
        self.book(heuristic, evaluations as f64 - booked);
        self.spent[number] += evaluations;
        self.descents[number] += 1;
    }

    fn book(&mut self, heuristic: Heuristic, cost: f64) {
        // Points that the user gave are nobody's share.
        if heuristic != Heuristic::Given {
            (0..COUNT).for_each(|number| self.due[number] += self.share[number] * cost);
            self.due[heuristic.number()] -= cost;
        }
    }

    /// Evaluations of ended tasks, in the order of [`Heuristic::ALL`].
    pub fn spent(&self) -> [u64; COUNT] {
        self.spent
    }

    /// Ended tasks, in the order of [`Heuristic::ALL`].
    pub fn descents(&self) -> [u64; COUNT] {
        self.descents
    }

    /// What one task costs: the heuristic's own mean, or that of all, or a guess.
    pub fn usual_cost(&self, heuristic: Heuristic) -> f64 {
        let mean = |spent: u64, descents: u64| spent as f64 / descents as f64;
        let number = heuristic.number();
        match (self.descents[number], self.descents.iter().sum::<u64>()) {
            (0, _) if self.expected[number].is_some() => self.expected[number].unwrap_or(0.0),
            (0, 0) => 100.0,
            (0, all) => mean(self.spent.iter().sum(), all),
            (own, _) => mean(self.spent[number], own),
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Whatever the costs of the tasks, the evaluations end near their shares.
    #[test]
    fn shares_are_of_evaluations() {
        let mix = Mix::read("hop:0.75,multistart:0.25").unwrap();
        let mut schedule = Schedule::new(&mix, 0.2);
        for _ in 0..3000 {
            let heuristic = schedule.next();
            schedule.begin(heuristic);
            let cost = match heuristic {
                Heuristic::Hop => 40,
                Heuristic::Multistart => 160,
                _ => 150,
            };
            schedule.end(heuristic, cost);
        }
        let spent = schedule.spent();
        let total: u64 = spent.iter().sum();
        let share = |heuristic: Heuristic| spent[heuristic.number()] as f64 / total as f64;
        assert!((share(Heuristic::Survey) - 0.2).abs() < 0.01);
        assert!((share(Heuristic::Hop) - 0.6).abs() < 0.01);
        assert!((share(Heuristic::Multistart) - 0.2).abs() < 0.01);
    }

    #[test]
    fn one_round_is_shared_out_too() {
        let mut schedule = Schedule::new(&Mix::read("hop:0.85,multistart:0.15").unwrap(), 0.2);
        let mut counts = [0; COUNT];
        for _ in 0..20 {
            let heuristic = schedule.next();
            schedule.begin(heuristic);
            counts[heuristic.number()] += 1;
        }
        assert_eq!(counts[Heuristic::Survey.number()], 4);
        assert_eq!(counts[Heuristic::Given.number()], 0);
    }
}
