//! The descent: bounded limited-memory quasi-Newton steps with a step limit.
//!
//! Unknowns are measured in the units of the region. A slot at its bound whose gradient pushes outward is held there;
//! the others take the quasi-Newton step, cut at the bounds (projected quasi-Newton, Bertsekas 1982; memory by Nocedal
//! 1980). No unknown moves by more than [`LONGEST`] of its unit at once, which carries a descent through walls of 1e25.
//! A step is accepted when the value falls enough (Armijo 1966) or, where values only differ by rounding, when the slope
//! has (Hager and Zhang 2005).
//!
//! It has converged when the step that is left, by the curvature met, is below 1e-7 of the units and would lower the
//! value by rounding only, or is below 1e-9: then values are exact and places good to about as much. That needs no
//! tolerance in the units of the objective.

use std::sync::Arc;

use super::history::History;
use super::region::Region;
use super::vectors::{dot, largest, padded};

/// The longest move of an unknown in one step, in its unit.
const LONGEST: f64 = 0.08;
/// The longest move of the first step, when no curvature is known.
const FIRST: f64 = 0.01;
/// The share of the expected decrease that must be reached.
const ENOUGH: f64 = 1e-4;
/// Values that differ by less than this, relative to the larger, differ by rounding.
const ROUNDING: f64 = 1e-13;
/// How many times the promised decrease an outlook allows for, and the evaluations before which nothing is promised.
const OUTLOOK: f64 = 16.0;
const OUTLOOK_FROM: u64 = 3;
/// Trials along one direction before it is given up.
const MOST_TRIALS: u32 = 24;

/// Whether a descent wants another value.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Progress {
    /// Ask again.
    Continue,
    /// It has ended.
    Ended,
}

/// How a descent ended.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum EndKind {
    /// The gradient vanished, as far as values can tell.
    Converged,
    /// The start lies outside the landscape.
    Outside,
    /// The evaluations were spent.
    OutOfBudget,
    /// No step goes down, though the gradient has not vanished: a kink, or noise.
    Stalled,
}

/// The end of a descent.
#[derive(Clone, Debug)]
pub struct End {
    /// How.
    pub kind: EndKind,
    /// The value there.
    pub value: f64,
    /// Where; cyclic unknowns between their ends.
    pub at: Vec<f64>,
}

/// A descent under way.
///
/// ```
/// use std::sync::Arc;
/// use thalweg::descent::{Descent, EndKind, Progress, Region};
/// use thalweg::landscape::Slot;
/// let slot = Slot { lower: -5.0, upper: 5.0, start_lower: -5.0, start_upper: 5.0, cyclic: false };
/// let region = Arc::new(Region::new(&[slot], &[]));
/// let mut descent = Descent::new(&region, 1000);
/// descent.start(&[4.0]);
/// loop {
///     let x = descent.ask()[0];
///     if descent.tell((x - 1.0) * (x - 1.0), &[2.0 * (x - 1.0)]) == Progress::Ended {
///         break;
///     }
/// }
/// let end = descent.end();
/// assert_eq!(end.kind, EndKind::Converged);
/// assert!((end.at[0] - 1.0).abs() < 1e-7);
/// ```
pub struct Descent {
    region: Arc<Region>,
    most: u64,
    evaluations: u64,
    /// Whether any slot has a bound.
    bounded: bool,
    history: History,
    /// The point reached, its value, and its gradient in scaled units (padded).
    at: Vec<f64>,
    value: f64,
    gradient: Vec<f64>,
    /// The direction in scaled units (padded), how far along it the trial is, and the slope there.
    direction: Vec<f64>,
    length: f64,
    slope: f64,
    trials: u32,
    trial: Vec<f64>,
    trial_gradient: Vec<f64>,
    /// The trial was cut at a bound.
    cut: bool,
    /// A bound has been touched since the start, so that slots may have to be held.
    touched: bool,
    steepest: bool,
    /// How much lower the curvature met so far promises to lead.
    promised: Option<f64>,
    started: bool,
    kind: Option<EndKind>,
}

impl Descent {
    /// A descent in a region, with so many evaluations at most. Call [`Descent::start`] before the first question.
    pub fn new(region: &Arc<Region>, most: u64) -> Self {
        let n = region.n_unknowns();
        let length = padded(n);
        let bounded = region.lower.iter().chain(&region.upper).any(|bound| bound.is_finite());
        Descent {
            region: region.clone(),
            most,
            evaluations: 0,
            bounded,
            history: History::new(length),
            at: vec![0.0; n],
            value: f64::NAN,
            gradient: vec![0.0; length],
            direction: vec![0.0; length],
            length: 0.0,
            slope: 0.0,
            trials: 0,
            trial: vec![0.0; n],
            trial_gradient: vec![0.0; length],
            cut: false,
            touched: false,
            steepest: true,
            promised: None,
            started: false,
            kind: None,
        }
    }

    /// Begins anew from a start, which is brought inside the bounds.
    pub fn start(&mut self, start: &[f64]) {
        for (slot, x) in self.trial.iter_mut().enumerate() {
            *x = start[slot].max(self.region.lower[slot]).min(self.region.upper[slot]);
        }
        let touches = |(slot, x): (usize, &f64)| *x <= self.region.lower[slot] || *x >= self.region.upper[slot];
        self.touched = self.trial.iter().enumerate().any(touches);
        self.evaluations = 0;
        self.history.clear();
        self.promised = None;
        self.started = false;
        self.kind = None;
    }

    /// The point whose value and gradient are wanted.
    pub fn ask(&self) -> &[f64] {
        &self.trial
    }

    /// Whether it has ended.
    pub fn has_ended(&self) -> bool {
        self.kind.is_some()
    }

    /// Evaluations so far.
    pub fn evaluations(&self) -> u64 {
        self.evaluations
    }

    /// The value that it may still reach, generously: where it stands, less several times what the curvature met so far
    /// promises. Minus infinity while little is known.
    pub fn outlook(&self) -> f64 {
        self.promised.map_or(f64::NEG_INFINITY, |promised| self.value - OUTLOOK * promised)
    }

    /// The end; of one that has not ended, as if its evaluations were spent.
    pub fn end(&self) -> End {
        let mut at = if self.started { self.at.clone() } else { self.trial.clone() };
        self.region.wrap(&mut at);
        End { kind: self.kind.unwrap_or(EndKind::OutOfBudget), value: self.value, at }
    }

    /// Takes the value and the gradient (in the unknowns' own units) at the point asked for.
    pub fn tell(&mut self, value: f64, gradient: &[f64]) -> Progress {
        self.evaluations += 1;
        let mut finite = value.is_finite();
        for ((scaled, g), scale) in self.trial_gradient.iter_mut().zip(gradient).zip(&self.region.scale) {
            *scaled = g * scale;
        }
        finite &= dot(&self.trial_gradient, &self.trial_gradient).is_finite()
            || self.trial_gradient.iter().all(|g| g.is_finite());
        if !self.started {
            if !finite {
                self.value = value;
                return self.finish(EndKind::Outside);
            }
            self.started = true;
            self.accept(value);
            return self.choose_direction();
        }
        if !finite {
            return self.shorten(0.2);
        }
        let slope = self.slope * self.length;
        let rise = value - self.value;
        let expected = if self.cut { self.actual_slope() } else { slope };
        if rise <= ENOUGH * expected || self.differs_by_rounding(value, expected) {
            let (steps, trial) = (&self.at, &self.trial);
            let (old, new, scale) = (&self.gradient, &self.trial_gradient, &self.region.scale);
            self.history.remember(|step, change| {
                for ((step, (x, before)), scale) in step.iter_mut().zip(trial.iter().zip(steps)).zip(scale) {
                    *step = (x - before) / scale;
                }
                for (change, (g, before)) in change.iter_mut().zip(new.iter().zip(old)) {
                    *change = g - before;
                }
            });
            self.accept(value);
            return self.choose_direction();
        }
        // The minimum of the parabola through value, slope and trial value, kept within bounds.
        let curvature = rise - slope;
        let factor = if curvature > 0.0 { -0.5 * slope / curvature } else { 0.5 };
        if self.steepest && factor * self.length * largest(&self.direction) < 1e-10 {
            // A start that is a minimum already: what is left to go is rounding.
            return self.finish(EndKind::Converged);
        }
        if self.steepest {
            // The parabola knows the curvature, of which the first step knew nothing: a start next to a minimum is there at
            // once.
            self.promised = Some(-0.5 * slope * factor);
            return self.shorten(factor.clamp(1e-6, 0.5));
        }
        self.shorten(factor.clamp(0.1, 0.5))
    }

    fn accept(&mut self, value: f64) {
        self.value = value;
        self.at.copy_from_slice(&self.trial);
        std::mem::swap(&mut self.gradient, &mut self.trial_gradient);
    }

    /// What the gradient at the point reached expects of the trial, which was cut at bounds.
    fn actual_slope(&self) -> f64 {
        let moves =
            self.trial.iter().zip(&self.at).zip(&self.region.scale).map(|((x, before), scale)| (x - before) / scale);
        moves.zip(&self.gradient).map(|(step, g)| step * g).sum()
    }

    /// Whether the values differ by rounding while the slope along the step has fallen well.
    fn differs_by_rounding(&self, value: f64, expected: f64) -> bool {
        if (value - self.value).abs() > ROUNDING * self.value.abs().max(value.abs()) || self.cut {
            return false;
        }
        let slope_there = dot(&self.trial_gradient, &self.direction) * self.length;
        slope_there <= (2.0 * ENOUGH - 1.0) * expected
    }

    fn shorten(&mut self, factor: f64) -> Progress {
        self.trials += 1;
        if self.evaluations >= self.most {
            return self.finish(EndKind::OutOfBudget);
        }
        self.length *= factor;
        if self.trials >= MOST_TRIALS || self.length * largest(&self.direction) < 1e-15 {
            return self.give_up();
        }
        self.set_trial();
        Progress::Continue
    }

    /// No step along this direction goes down: try the steepest, or end.
    fn give_up(&mut self) -> Progress {
        let expected = self.slope.abs();
        if largest(&self.direction) < 1e-5 && expected <= 1e-10 * self.value.abs() {
            // Values cannot tell any more; the polish will.
            return self.finish(EndKind::Converged);
        }
        if self.steepest {
            return self.finish(EndKind::Stalled);
        }
        self.history.clear();
        self.choose_direction()
    }

    fn choose_direction(&mut self) -> Progress {
        self.trials = 0;
        self.length = 1.0;
        self.direction.copy_from_slice(&self.gradient);
        let held = self.hold();
        let steepness = largest(&self.direction);
        if steepness == 0.0 {
            return self.finish(EndKind::Converged);
        }
        self.steepest = self.history.is_empty();
        if self.steepest {
            // Scaled so that no sum overflows.
            let factor = -FIRST / steepness;
            self.direction.iter_mut().for_each(|x| *x *= factor);
        } else {
            self.history.step(&mut self.direction);
            if held {
                self.hold_direction();
            }
        }
        self.slope = dot(&self.gradient, &self.direction);
        let reach = largest(&self.direction);
        if !(self.slope < 0.0) || !reach.is_finite() {
            if self.steepest {
                return self.finish(EndKind::Stalled);
            }
            self.history.clear();
            return self.choose_direction();
        }
        let known = !self.steepest && self.evaluations >= OUTLOOK_FROM;
        self.promised = known.then_some(-0.5 * self.slope);
        let rounding = -self.slope <= ROUNDING * self.value.abs();
        if !self.steepest && (reach < 1e-9 || reach < 1e-7 && rounding) {
            return self.finish(EndKind::Converged);
        }
        if self.evaluations >= self.most {
            return self.finish(EndKind::OutOfBudget);
        }
        if reach > LONGEST {
            self.length = LONGEST / reach;
        }
        self.set_trial();
        Progress::Continue
    }

    /// Sets the direction to 0 where a bound holds the slot; says whether one does.
    fn hold(&mut self) -> bool {
        let mut held = false;
        if self.bounded && self.touched {
            for slot in 0..self.at.len() {
                if self.is_held(slot) {
                    self.direction[slot] = 0.0;
                    held = true;
                }
            }
        }
        held
    }

    fn hold_direction(&mut self) {
        self.hold();
    }

    fn is_held(&self, slot: usize) -> bool {
        let (x, g) = (self.at[slot], self.gradient[slot]);
        x <= self.region.lower[slot] && g >= 0.0 || x >= self.region.upper[slot] && g <= 0.0
    }

    fn set_trial(&mut self) {
        self.cut = false;
        let region = &self.region;
        let moves = self.trial.iter_mut().zip(&self.at).zip(self.direction.iter().zip(&region.scale));
        for ((x, before), (direction, scale)) in moves {
            *x = before + self.length * direction * scale;
        }
        if self.bounded {
            let mut cut = false;
            for ((x, lower), upper) in self.trial.iter_mut().zip(&region.lower).zip(&region.upper) {
                let inside = x.max(*lower).min(*upper);
                cut |= inside != *x;
                *x = inside;
            }
            self.cut = cut;
            self.touched |= cut;
        }
    }

    fn finish(&mut self, kind: EndKind) -> Progress {
        self.kind = Some(kind);
        Progress::Ended
    }
}
