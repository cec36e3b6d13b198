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
    spent: [u64; COUNT],
    descents: [u64; COUNT],
    pending: [u64; COUNT],
}

impl Schedule {
    /// An account in which the survey has the given share and the mix the rest.
    pub fn new(mix: &Mix, survey: f64) -> Self {
        let mut share = [0.0; COUNT];
        share[Heuristic::Survey.number()] = survey;
        for &(heuristic, part) in mix.members() {
            share[heuristic.number()] = part * (1.0 - survey);
        }
        Schedule { share, spent: [0; COUNT], descents: [0; COUNT], pending: [0; COUNT] }
    }

    /// The heuristic that is farthest below its share, counting what is under way; ties go to the first.
    pub fn next(&self) -> Heuristic {
        let expected: Vec<f64> = Heuristic::ALL.iter().map(|&heuristic| self.expected(heuristic)).collect();
        let total: f64 = Heuristic::ALL
            .iter()
            .filter(|heuristic| self.share[heuristic.number()] > 0.0)
            .map(|heuristic| expected[heuristic.number()])
            .sum();
        let deficit = |heuristic: Heuristic| {
            let number = heuristic.number();
            // The next task's own cost is added, so that a share is aimed at rather than passed each time.
            self.share[number] * (total + self.usual_cost(heuristic)) - expected[number]
        };
        let mut best = (f64::NEG_INFINITY, Heuristic::Survey);
        for heuristic in Heuristic::ALL.into_iter().filter(|heuristic| self.share[heuristic.number()] > 0.0) {
            if deficit(heuristic) > best.0 {
                best = (deficit(heuristic), heuristic);
            }
        }
        best.1
    }

    /// A task of the heuristic is under way.
    pub fn begin(&mut self, heuristic: Heuristic) {
        self.pending[heuristic.number()] += 1;
    }

    /// A task of the heuristic has ended.
    pub fn end(&mut self, heuristic: Heuristic, evaluations: u64) {
        let number = heuristic.number();
        self.pending[number] -= 1;
        self.spent[number] += evaluations;
        self.descents[number] += 1;
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
            (0, 0) => 100.0,
            (0, all) => mean(self.spent.iter().sum(), all),
            (own, _) => mean(self.spent[number], own),
        }
    }

    /// Evaluations that the tasks under way are expected to take.
    pub fn under_way(&self) -> f64 {
        Heuristic::ALL
            .iter()
            .map(|&heuristic| self.pending[heuristic.number()] as f64 * self.usual_cost(heuristic))
            .sum()
    }

    fn expected(&self, heuristic: Heuristic) -> f64 {
        let number = heuristic.number();
        self.spent[number] as f64 + self.pending[number] as f64 * self.usual_cost(heuristic)
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
        let mut schedule = Schedule::new(&Mix::default(), 0.2);
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
