//! One descent within a block: the numbers that decide what it does next.

/// The longest move of an unknown in one step, in its unit.
const LONGEST: f64 = 0.08;
/// The longest move of the first step, when no curvature is known.
pub const FIRST: f64 = 0.01;
/// The share of the expected decrease that must be reached.
const ENOUGH: f64 = 1e-4;
/// Values that differ by less than this, relative to the larger, differ by rounding.
const ROUNDING: f64 = 1e-13;
/// How many times the promised decrease an outlook allows for, and the evaluations before which nothing is promised.
const OUTLOOK: f64 = 16.0;
const OUTLOOK_FROM: u64 = 3;
/// Trials along one direction before it is given up.
const MOST_TRIALS: u32 = 24;

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

/// Where a lane stands.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Phase {
    /// Nobody is there.
    Idle,
    /// Its start has not been evaluated yet.
    Begun,
    /// A trial is out.
    Trying,
    /// It has ended.
    Ended(EndKind),
}

/// What a lane makes of an answer.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Step {
    /// The trial is accepted.
    Accept,
    /// Another trial along the same direction.
    Shorten,
    /// Begin anew along the steepest direction.
    Restart,
    /// Nothing more.
    End,
}

/// An answer as a lane sees it.
pub struct Answer {
    /// The value at the trial.
    pub value: f64,
    /// Whether the gradient is finite.
    pub finite: bool,
    /// The inner product of the new gradient with the direction.
    pub along: f64,
    /// What the old gradient expects of the move, where bounds have cut it.
    pub expected: f64,
}

/// A descent within a block.
#[derive(Clone, Debug)]
pub struct Lane {
    pub phase: Phase,
    pub evaluations: u64,
    /// The value at the point reached.
    pub value: f64,
    /// The largest element of the gradient there.
    pub size: f64,
    /// One over it; 0 where that is not finite.
    pub unit: f64,
    /// The step is so many times the direction, at full length; never more than 0.
    factor: f64,
    /// How much of the full length the trial goes.
    length: f64,
    /// The slope along the step, and its largest element, both at full length.
    slope: f64,
    reach: f64,
    trials: u32,
    /// The trial was cut at a bound.
    pub cut: bool,
    /// A slot of the trial stands at a bound, so that it may have to be held.
    pub touches: bool,
    steepest: bool,
    /// How much lower the curvature met so far promises to lead.
    promised: Option<f64>,
}

impl Lane {
    /// A lane with nobody there.
    pub fn idle() -> Self {
        Lane {
            phase: Phase::Idle,
            evaluations: 0,
            value: f64::NAN,
            size: 0.0,
            unit: 0.0,
            factor: 0.0,
            length: 0.0,
            slope: 0.0,
            reach: 0.0,
            trials: 0,
            cut: false,
            touches: false,
            steepest: true,
            promised: None,
        }
    }

    /// A lane whose start is to be evaluated.
    pub fn begun() -> Self {
        Lane { phase: Phase::Begun, ..Lane::idle() }
    }

    /// Whether it wants a value.
    pub fn is_under_way(&self) -> bool {
        matches!(self.phase, Phase::Begun | Phase::Trying)
    }

    /// How many times the direction the trial lies from the point reached.
    pub fn reach(&self) -> f64 {
        self.factor * self.length
    }

    /// Takes an answer, with so many evaluations at most.
    pub fn take(&mut self, answer: &Answer, most: u64) -> Step {
        self.evaluations += 1;
        let value = answer.value;
        let finite = value.is_finite() && answer.finite;
        if self.phase == Phase::Begun {
            self.value = value;
            return if finite { Step::Accept } else { self.end(EndKind::Outside) };
        }
        if !finite {
            return self.shorten(0.2, most);
        }
        let slope = self.slope * self.length;
        let rise = value - self.value;
        let expected = if self.cut { answer.expected } else { slope };
        if rise <= ENOUGH * expected || self.differs_by_rounding(answer, expected) {
            return Step::Accept;
        }
        // The minimum of the parabola through value, slope and trial value, kept within bounds.
        let curvature = rise - slope;
        let factor = if curvature > 0.0 { -0.5 * slope / curvature } else { 0.5 };
        if self.steepest && factor * self.length * self.reach < 1e-10 {
            // A start that is a minimum already: what is left to go is rounding.
            return self.end(EndKind::Converged);
        }
        if self.steepest {
            // The parabola knows the curvature, of which the first step knew nothing: a start next to a minimum is there
            // at once.
            self.promised = Some(-0.5 * slope * factor);
            return self.shorten(factor.clamp(1e-6, 0.5), most);
        }
        self.shorten(factor.clamp(0.1, 0.5), most)
    }

    /// The value that it may still reach, generously: where it stands, less several times what the curvature met so far
    /// promises. Minus infinity while little is known.
    pub fn outlook(&self) -> f64 {
        self.promised.map_or(f64::NEG_INFINITY, |promised| self.value - OUTLOOK * promised)
    }

    /// Whether the values differ by rounding while the slope along the step has fallen well.
    fn differs_by_rounding(&self, answer: &Answer, expected: f64) -> bool {
        if (answer.value - self.value).abs() > ROUNDING * self.value.abs().max(answer.value.abs()) || self.cut {
            return false;
        }
        self.factor * answer.along * self.length <= (2.0 * ENOUGH - 1.0) * expected
    }

    fn shorten(&mut self, factor: f64, most: u64) -> Step {
        self.trials += 1;
        if self.evaluations >= most {
            return self.end(EndKind::OutOfBudget);
        }
        self.length *= factor;
        if self.trials < MOST_TRIALS && self.length * self.reach >= 1e-15 {
            return Step::Shorten;
        }
        // No step along this direction goes down: try the steepest, or end.
        if self.reach < 1e-5 && self.slope.abs() <= 1e-10 * self.value.abs() {
            // Values cannot tell any more; the polish will.
            return self.end(EndKind::Converged);
        }
        if self.steepest { self.end(EndKind::Stalled) } else { Step::Restart }
    }

    /// Sets out along a new direction: its factor, and its inner product with the gradient and its largest element.
    pub fn set_out(&mut self, steepest: bool, factor: f64, product: f64, largest: f64, most: u64) -> Step {
        self.phase = Phase::Trying;
        self.steepest = steepest;
        self.trials = 0;
        self.factor = -factor;
        self.slope = -factor * product;
        self.reach = factor * largest;
        if !(self.slope < 0.0) || !self.reach.is_finite() {
            return if steepest { self.end(EndKind::Stalled) } else { Step::Restart };
        }
        let known = !steepest && self.evaluations >= OUTLOOK_FROM;
        self.promised = known.then_some(-0.5 * self.slope);
        let rounding = -self.slope <= ROUNDING * self.value.abs();
        if !steepest && (self.reach < 1e-9 || self.reach < 1e-7 && rounding) {
            return self.end(EndKind::Converged);
        }
        if self.evaluations >= most {
            return self.end(EndKind::OutOfBudget);
        }
        self.length = if self.reach > LONGEST { LONGEST / self.reach } else { 1.0 };
        Step::Accept
    }

    /// Ends it.
    pub fn end(&mut self, kind: EndKind) -> Step {
        self.phase = Phase::Ended(kind);
        Step::End
    }
}
