//! One annealing chain: asks for values, is told them, ends at the lowest point that it met.

use rand::RngExt;
use rand_chacha::ChaCha8Rng;

use crate::numbers::functions;
use crate::search::structure::Structure;

/// Moves from which the first temperature is measured.
const SAMPLES: u32 = 40;
/// The share of rises that are accepted at the first temperature.
const FIRST_ACCEPTANCE: f64 = 0.7;
/// How far apart the distributions of values at successive temperatures may be (Aarts and van Laarhoven 1985).
const DISTANCE: f64 = 0.6;
/// A stage with fewer accepted moves is frozen.
const FROZEN: f64 = 0.02;
/// The steps of an unknown are adapted after so many trials of it, so that 40 to 60 % are accepted.
const TRIALS: u32 = 8;
/// The first step, relative to the scale.
const FIRST_STEP: f64 = 0.15;
/// The least step; below it a chain only polishes, which descents do better.
const LEAST_STEP: f64 = 1e-3;

/// A chain under way.
///
/// The first temperature comes from sampled uphill moves (target acceptance, after Kirkpatrick, Gelatt and Vecchi 1983);
/// it cools by the rule of Aarts and van Laarhoven (1985), `T / (1 + T ln(1 + distance)/(3 sigma))`, with the spread of
/// values `sigma` measured at each temperature; steps are adapted unknown by unknown (Corana, Marchesi, Martini and
/// Ridella 1987). A frozen chain with evaluations left is re-heated, half way back to its first temperature in the
/// logarithm, and goes on from its lowest point.
#[derive(Clone, Debug)]
pub struct Annealing {
    units: Vec<Unit>,
    rng: ChaCha8Rng,
    left: u64,
    at: Vec<f64>,
    value: Option<f64>,
    trial: Vec<f64>,
    lowest: (f64, Vec<f64>),
    unit: usize,
    sampling: u32,
    rises: (f64, u32),
    temperature: f64,
    first_temperature: f64,
    stage: Stage,
    moves_a_stage: u32,
}

/// Unknowns that move together: a row of a cloud, or one unknown.
#[derive(Clone, Debug)]
struct Unit {
    slots: Vec<usize>,
    step: f64,
    tried: u32,
    accepted: u32,
}

/// What is measured at one temperature.
#[derive(Clone, Debug, Default)]
struct Stage {
    moves: u32,
    accepted: u32,
    /// Sums of values and of their squares, relative to the first one.
    origin: f64,
    sum: f64,
    squares: f64,
}

impl Annealing {
    /// A chain from a point, with so many evaluations at most.
    pub fn new(structure: &Structure, at: Vec<f64>, evaluations: u64, rng: ChaCha8Rng) -> Self {
        let mut single = vec![true; at.len()];
        let mut units = Vec::new();
        let unit = |slots: Vec<usize>| Unit { slots, step: FIRST_STEP, tried: 0, accepted: 0 };
        for cloud in &structure.clouds {
            for row in &cloud.rows {
                let slots = row[..cloud.dimensions].to_vec();
                slots.iter().for_each(|&slot| single[slot] = false);
                units.push(unit(slots));
            }
        }
        units.extend((0..at.len()).filter(|&slot| single[slot]).map(|slot| unit(vec![slot])));
        let moves_a_stage = (2 * units.len() as u32).clamp(16, 200);
        Annealing {
            units,
            rng,
            left: evaluations.max(1),
            trial: at.clone(),
            lowest: (f64::INFINITY, at.clone()),
            at,
            value: None,
            unit: 0,
            sampling: SAMPLES,
            rises: (0.0, 0),
            temperature: f64::INFINITY,
            first_temperature: f64::INFINITY,
            stage: Stage::default(),
            moves_a_stage,
        }
    }

    /// The point whose value is wanted.
    pub fn ask(&self) -> &[f64] {
        &self.trial
    }

    /// Whether it has ended.
    pub fn has_ended(&self) -> bool {
        self.left == 0
    }

    /// The lowest point that it met.
    pub fn result(&self) -> &[f64] {
        &self.lowest.1
    }

    /// Takes the value in and makes the next trial.
    pub fn tell(&mut self, structure: &Structure, value: f64) {
        self.left -= 1;
        let value = if value.is_nan() { f64::INFINITY } else { value };
        if value < self.lowest.0 {
            self.lowest = (value, self.trial.clone());
        }
        match self.value {
            None => self.value = Some(value),
            Some(current) => self.judge(current, value),
        }
        self.make_trial(structure);
    }

    fn judge(&mut self, current: f64, value: f64) {
        let rise = value - current;
        let accepted = if self.sampling > 0 {
            self.sampling -= 1;
            if rise > 0.0 && rise.is_finite() {
                self.rises = (self.rises.0 + rise, self.rises.1 + 1);
            }
            if self.sampling == 0 {
                self.set_first_temperature();
            }
            // Only down while it samples: from a random start most of the first moves tell of a wall's height.
            rise <= 0.0
        } else {
            rise <= 0.0 || self.rng.random::<f64>() < functions::exponential(-rise / self.temperature)
        };
        let unit = &mut self.units[self.unit];
        unit.tried += 1;
        unit.accepted += u32::from(accepted);
        if unit.tried >= TRIALS {
            let share = f64::from(unit.accepted) / f64::from(unit.tried);
            let factor = if share > 0.6 {
                1.0 + 2.0 * (share - 0.6) / 0.4
            } else if share < 0.4 {
                1.0 / (1.0 + 2.0 * (0.4 - share) / 0.4)
            } else {
                1.0
            };
            unit.step = (unit.step * factor).clamp(LEAST_STEP, 0.5);
            (unit.tried, unit.accepted) = (0, 0);
        }
        if accepted {
            self.value = Some(value);
            std::mem::swap(&mut self.at, &mut self.trial);
        }
        if self.sampling == 0 {
            self.count(accepted);
        }
    }

    fn set_first_temperature(&mut self) {
        let (sum, count) = self.rises;
        let mean = if count > 0 { sum / f64::from(count) } else { 1.0 };
        self.first_temperature = mean / functions::logarithm(1.0 / FIRST_ACCEPTANCE);
        self.temperature = self.first_temperature;
        self.stage = Stage::default();
    }

    fn count(&mut self, accepted: bool) {
        let value = self.value.unwrap_or(0.0);
        if self.stage.moves == 0 {
            self.stage.origin = value;
        }
        self.stage.moves += 1;
        self.stage.accepted += u32::from(accepted);
        let offset = value - self.stage.origin;
        self.stage.sum += offset;
        self.stage.squares += offset * offset;
        if self.stage.moves < self.moves_a_stage {
            return;
        }
        let moves = f64::from(self.stage.moves);
        let mean = self.stage.sum / moves;
        let spread = (self.stage.squares / moves - mean * mean).max(0.0).sqrt();
        if f64::from(self.stage.accepted) < FROZEN * moves || spread == 0.0 {
            self.temperature = (self.temperature * self.first_temperature).sqrt();
            self.at.clone_from(&self.lowest.1);
            self.value = Some(self.lowest.0);
        } else {
            let rate = functions::logarithm(1.0 + DISTANCE) / (3.0 * spread);
            self.temperature /= 1.0 + self.temperature * rate;
        }
        self.stage = Stage::default();
    }

    fn make_trial(&mut self, structure: &Structure) {
        self.unit = self.rng.random_range(0..self.units.len());
        self.trial.clone_from(&self.at);
        let unit = &self.units[self.unit];
        for &slot in &unit.slots {
            self.trial[slot] += unit.step * structure.scale[slot] * (2.0 * self.rng.random::<f64>() - 1.0);
        }
        structure.bring_inside(&mut self.trial);
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::base::random::{Purpose, stream};

    fn line(n: usize) -> Structure {
        Structure {
            start_lower: vec![-5.0; n],
            start_upper: vec![5.0; n],
            lower: vec![-5.0; n],
            upper: vec![5.0; n],
            scale: vec![10.0; n],
            cyclic: vec![false; n],
            clouds: Vec::new(),
            exchanges: Vec::new(),
        }
    }

    /// A tilted double well: chains from the higher well end in the lower one, mostly, and never above their start.
    #[test]
    fn chains_leave_the_higher_well() {
        let structure = line(2);
        let value = |at: &[f64]| at.iter().map(|x| (x * x - 4.0) * (x * x - 4.0) + 2.0 * x).sum::<f64>();
        let mut hits = 0;
        for seed in 0..40 {
            let mut chain = Annealing::new(&structure, vec![2.0, 2.0], 1500, stream(seed, 0, 0, Purpose::Task));
            let mut asked = 0;
            while !chain.has_ended() {
                let told = value(chain.ask());
                chain.tell(&structure, told);
                asked += 1;
            }
            assert_eq!(asked, 1500);
            assert!(value(chain.result()) <= value(&[2.0, 2.0]));
            hits += u32::from(chain.result().iter().all(|&x| x < 0.0));
        }
        assert!(hits >= 36, "{hits} of 40");
    }

    /// Values that are no numbers, everywhere or here and there, end no chain early and are never its result.
    #[test]
    fn holes_are_not_entered() {
        let structure = line(1);
        let mut chain = Annealing::new(&structure, vec![1.0], 500, stream(1, 0, 0, Purpose::Task));
        while !chain.has_ended() {
            let x = chain.ask()[0];
            chain.tell(&structure, if x < 0.0 { f64::NAN } else { x });
        }
        assert!(chain.result()[0] >= 0.0 && chain.result()[0] < 0.1);
    }
}
