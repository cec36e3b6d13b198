//! Descents in lanes: bounded limited-memory quasi-Newton steps with a step limit.
//!
//! Unknowns are measured in the units of the region. A slot at its bound whose gradient pushes outward is held there;
//! the others take the quasi-Newton step, cut at the bounds (projected quasi-Newton, Bertsekas 1982; memory by Nocedal
//! 1980). No unknown moves by more than 0.08 of its unit at once, which carries a descent through walls of 1e25.
//! A step is accepted when the value falls enough (Armijo 1966) or, where values only differ by rounding, when the slope
//! has (Hager and Zhang 2005).
//!
//! It has converged when the step that is left, by the curvature met, is below 1e-7 of the units and would lower the
//! value by rounding only, or is below 1e-9: then values are exact and places good to about as much. That needs no
//! tolerance in the units of the objective.
//!
//! All lanes take their steps together, in blocks whose vectors lie side by side (see `kernel::lanes::algebra`); each
//! decides by its own numbers (see `lane`).

use std::sync::Arc;

use crate::kernel::Build;
use crate::kernel::lanes::algebra::{Acceptance, Algebra, BLOCK, Bounds, Columns, Lanes, Pair, Reached, Short};

use super::lane::{Answer, EndKind, FIRST, Lane, Phase, Step};
use super::memory::Pairs;
use super::region::Region;

/// The end of a descent.
#[derive(Clone, Debug, PartialEq)]
pub struct End {
    /// How.
    pub kind: EndKind,
    /// The value there.
    pub value: f64,
    /// Where; cyclic unknowns between their ends.
    pub at: Vec<f64>,
}

/// Descents under way, one in each lane; they know nothing of each other.
///
/// Points, values and gradients stand in rows as in a machine: one row for each unknown, one number for each lane.
///
/// ```
/// use std::sync::Arc;
/// use thalweg::descent::{Descents, EndKind, Region};
/// use thalweg::landscape::Slot;
/// let slot = Slot { lower: -5.0, upper: 5.0, start_lower: -5.0, start_upper: 5.0, cyclic: false };
/// let region = Arc::new(Region::new(&[slot], &[]));
/// let mut descents = Descents::new(&region, 8, 1000);
/// descents.start(3, &[4.0]);
/// let mut points = [0.0; 8];
/// while !descents.has_ended(3) {
///     descents.ask(&mut points);
///     descents.tell(&points, &points.map(|x| (x - 1.0) * (x - 1.0)), &points.map(|x| 2.0 * (x - 1.0)));
/// }
/// let end = descents.end(3);
/// assert_eq!(end.kind, EndKind::Converged);
/// assert!((end.at[0] - 1.0).abs() < 1e-7);
/// ```
pub struct Descents {
    shared: Shared,
    blocks: Vec<Block>,
}

/// What all blocks share.
struct Shared {
    region: Arc<Region>,
    inverse_scale: Vec<f64>,
    /// Whether any slot has a bound.
    bounded: bool,
    most: u64,
    algebra: Algebra,
}

/// Eight descents side by side.
struct Block {
    lanes: [Lane; BLOCK],
    /// The points reached, and the gradients there in scaled units.
    at: Vec<Lanes>,
    gradient: Vec<Lanes>,
    /// Steps are multiples of it.
    direction: Vec<Short>,
    work: Vec<Short>,
    /// 0 where a bound holds the slot, 1 elsewhere; as of the last step that touched a bound.
    free: Vec<Short>,
    pairs: Pairs,
}

impl Descents {
    /// Room for so many descents (a multiple of 8) in a region, each with so many evaluations at most.
    pub fn new(region: &Arc<Region>, lanes: usize, most: u64) -> Self {
        Descents::with_algebra(region, lanes, most, Algebra::new())
    }

    /// The same with a given build of the algebra. The bits are the same in all.
    pub fn with_build(region: &Arc<Region>, lanes: usize, most: u64, build: Build) -> Self {
        Descents::with_algebra(region, lanes, most, Algebra::with_build(build))
    }

    fn with_algebra(region: &Arc<Region>, lanes: usize, most: u64, algebra: Algebra) -> Self {
        let bounded = region.lower.iter().chain(&region.upper).any(|bound| bound.is_finite());
        let inverse_scale = region.scale.iter().map(|scale| 1.0 / scale).collect();
        let n = region.n_unknowns();
        Descents {
            shared: Shared { region: region.clone(), inverse_scale, bounded, most, algebra },
            blocks: (0..lanes.div_ceil(BLOCK)).map(|_| Block::new(n)).collect(),
        }
    }

    /// Begins a descent from a start, which is brought inside the bounds. What was in the lane is forgotten.
    pub fn start(&mut self, lane: usize, start: &[f64]) {
        self.blocks[lane / BLOCK].start(lane % BLOCK, start, &self.shared.region);
    }

    /// Forgets the descent in a lane.
    pub fn leave(&mut self, lane: usize) {
        self.blocks[lane / BLOCK].lanes[lane % BLOCK] = Lane::idle();
    }

    /// Moves a descent to an earlier block, where its lane must be free: it goes on there as it would have here. Lanes of
    /// one block need no such thing.
    pub fn shift(&mut self, from: usize, to: usize) {
        let (front, back) = self.blocks.split_at_mut(from / BLOCK);
        if let (Some(target), Some(source)) = (front.get_mut(to / BLOCK), back.first_mut()) {
            target.take_over(to % BLOCK, source, from % BLOCK);
            source.lanes[from % BLOCK] = Lane::idle();
        }
    }

    /// Writes the points whose values and gradients are wanted into rows, which may be narrower than there are lanes if
    /// nobody is in the lanes beyond. Lanes that want nothing keep what stands there.
    pub fn ask(&mut self, points: &mut [f64]) {
        let width = points.len() / self.shared.region.n_unknowns();
        for (number, block) in self.blocks.iter_mut().enumerate().take(width / BLOCK) {
            block.ask(&self.shared, (&mut *points, width, number * BLOCK));
        }
    }

    /// Takes the values and the gradients (in the unknowns' own units) at the points that were asked for.
    pub fn tell(&mut self, points: &[f64], values: &[f64], gradients: &[f64]) {
        let width = values.len();
        for (number, block) in self.blocks.iter_mut().enumerate().take(width / BLOCK) {
            let columns = |rows| Columns { rows, width, first: number * BLOCK };
            block.tell(&self.shared, columns(points), &values[number * BLOCK..][..BLOCK], columns(gradients));
        }
    }

    /// Whether a descent has ended.
    pub fn has_ended(&self, lane: usize) -> bool {
        matches!(self.lane(lane).phase, Phase::Ended(_))
    }

    /// Evaluations of a descent so far.
    pub fn evaluations(&self, lane: usize) -> u64 {
        self.lane(lane).evaluations
    }

    /// The value that a descent may still reach, generously: where it stands, less several times what the curvature met so
    /// far promises. Minus infinity while little is known.
    pub fn outlook(&self, lane: usize) -> f64 {
        self.lane(lane).outlook()
    }

    /// The end; of one that has not ended, as if its evaluations were spent.
    pub fn end(&self, lane: usize) -> End {
        let block = &self.blocks[lane / BLOCK];
        let mut at: Vec<f64> = block.at.iter().map(|row| row.0[lane % BLOCK]).collect();
        self.shared.region.wrap(&mut at);
        let kind = match self.lane(lane).phase {
            Phase::Ended(kind) => kind,
            _ => EndKind::OutOfBudget,
        };
        End { kind, value: self.lane(lane).value, at }
    }

    fn lane(&self, lane: usize) -> &Lane {
        &self.blocks[lane / BLOCK].lanes[lane % BLOCK]
    }
}

impl Block {
    fn new(n: usize) -> Self {
        // Even, since sums take two rows at a time.
        let length = n.next_multiple_of(2);
        Block {
            lanes: std::array::from_fn(|_| Lane::idle()),
            at: vec![Lanes::ZERO; n],
            gradient: vec![Lanes::ZERO; n],
            direction: vec![Short::ZERO; length],
            work: vec![Short::ZERO; length],
            free: vec![Short::ZERO; n],
            pairs: Pairs::new(length),
        }
    }

    fn start(&mut self, lane: usize, start: &[f64], region: &Region) {
        for (slot, at) in self.at.iter_mut().enumerate() {
            at.0[lane] = start[slot].max(region.lower[slot]).min(region.upper[slot]);
        }
        self.gradient.iter_mut().for_each(|row| row.0[lane] = 0.0);
        self.direction.iter_mut().for_each(|row| row.0[lane] = 0.0);
        self.pairs.clear(lane);
        self.lanes[lane] = Lane::begun();
    }

    fn take_over(&mut self, lane: usize, other: &Block, other_lane: usize) {
        self.lanes[lane] = other.lanes[other_lane].clone();
        for (to, from) in [(&mut self.at, &other.at), (&mut self.gradient, &other.gradient)] {
            to.iter_mut().zip(from).for_each(|(to, from)| to.0[lane] = from.0[other_lane]);
        }
        self.direction.iter_mut().zip(&other.direction).for_each(|(to, from)| to.0[lane] = from.0[other_lane]);
        self.pairs.take_over(lane, &other.pairs, other_lane);
    }

    fn ask(&mut self, shared: &Shared, points: (&mut [f64], usize, usize)) {
        let (mut reach, mut under_way) = (Lanes::ZERO, Lanes::ZERO);
        for (lane, state) in self.lanes.iter().enumerate().filter(|(_, state)| state.is_under_way()) {
            reach.0[lane] = state.reach();
            under_way.0[lane] = 1.0;
        }
        if under_way == Lanes::ZERO {
            return;
        }
        let region = &shared.region;
        let bounds = shared.bounded.then_some(Bounds { lower: &region.lower, upper: &region.upper });
        let (at, direction) = (&self.at, &self.direction);
        let met = shared.algebra.propose(at, direction, &region.scale, bounds, &reach, &under_way, points);
        for (lane, state) in self.lanes.iter_mut().enumerate() {
            state.cut = met.cut.0[lane] > 0.0;
            state.touches = met.touched.0[lane] > 0.0;
        }
    }

    fn tell(&mut self, shared: &Shared, points: Columns<'_>, values: &[f64], gradients: Columns<'_>) {
        if !self.lanes.iter().any(Lane::is_under_way) {
            return;
        }
        let (algebra, region) = (shared.algebra, &shared.region);
        let judged = algebra.judge(gradients, &region.scale, &self.direction);
        let expected = if self.lanes.iter().any(|lane| lane.is_under_way() && lane.cut) {
            algebra.expect(points, &self.at, &self.gradient, &shared.inverse_scale)
        } else {
            Lanes::ZERO
        };
        let mut how = Acceptance { taken: Lanes::ZERO, down: Lanes::ZERO, unit: Lanes::ZERO };
        for (lane, &value) in values.iter().enumerate() {
            let state = &mut self.lanes[lane];
            if !state.is_under_way() {
                continue;
            }
            let answer = Answer {
                value,
                finite: judged.doubt.0[lane] == 0.0,
                along: judged.along.0[lane],
                expected: expected.0[lane],
            };
            // The first point has no step before it: its pair is of zeros, and void.
            let down = if state.phase == Phase::Begun { 0.0 } else { state.unit };
            match state.take(&answer, shared.most) {
                Step::Accept => {
                    state.value = value;
                    state.size = judged.largest.0[lane];
                    how.taken.0[lane] = 1.0;
                    how.down.0[lane] = down;
                    let unit = 1.0 / state.size;
                    state.unit = if unit.is_finite() { unit } else { 0.0 };
                    how.unit.0[lane] = state.unit;
                }
                Step::Restart => self.restart(lane, shared),
                Step::Shorten | Step::End => {}
            }
        }
        self.go_on(shared, points, gradients, &how);
    }

    /// Moves the lanes that accept their trials, and chooses their next directions.
    fn go_on(&mut self, shared: &Shared, points: Columns<'_>, gradients: Columns<'_>, how: &Acceptance) {
        let (algebra, region) = (shared.algebra, &shared.region);
        let (step, change) = self.pairs.advance();
        if how.taken == Lanes::ZERO {
            self.pairs.leave_void();
            return;
        }
        let taken = |lane: usize| how.taken.0[lane] > 0.0;
        let touches = (0..BLOCK).any(|lane| taken(lane) && self.lanes[lane].touches);
        let bounds = (shared.bounded && touches).then_some(Bounds { lower: &region.lower, upper: &region.upper });
        let reached = Reached { at: &mut self.at, gradient: &mut self.gradient };
        let pair = Pair { step, change, work: &mut self.work, free: &mut self.free };
        let scales = (&region.scale[..], &shared.inverse_scale[..]);
        let sums = algebra.accept(points, gradients, scales, bounds, how, reached, pair);
        for lane in (0..BLOCK).filter(|&lane| taken(lane)) {
            self.pairs.remember(lane, &sums, how.down.0[lane]);
        }
        let free = bounds.map(|_| &self.free[..]);
        let (work, direction) = (&mut self.work, &mut self.direction);
        let directed =
            algebra.direct(&self.pairs.memory(), &sums.aim, &self.gradient, free, &how.taken, work, direction);
        for lane in (0..BLOCK).filter(|&lane| taken(lane)) {
            let state = &mut self.lanes[lane];
            if sums.steepness.0[lane] == 0.0 {
                state.end(EndKind::Converged);
                continue;
            }
            let (product, largest) = (directed.slope.0[lane], directed.largest.0[lane]);
            let steepest = self.pairs.is_empty(lane);
            let factor = if steepest { FIRST / largest } else { self.pairs.scale(lane) * state.size };
            if state.set_out(steepest, factor, product, largest, shared.most) == Step::Restart {
                self.restart(lane, shared);
            }
        }
    }

    /// Sets a lane out along the steepest direction, with nothing remembered.
    fn restart(&mut self, lane: usize, shared: &Shared) {
        self.pairs.clear(lane);
        let (region, state) = (&shared.region, &mut self.lanes[lane]);
        let (mut product, mut largest) = (0.0, 0.0_f64);
        for (slot, direction) in self.direction.iter_mut().enumerate().take(self.at.len()) {
            let (x, g) = (self.at[slot].0[lane], self.gradient[slot].0[lane]);
            let held = x <= region.lower[slot] && g >= 0.0 || x >= region.upper[slot] && g <= 0.0;
            direction.0[lane] = if held { 0.0 } else { (g / state.size) as f32 };
            let along = f64::from(direction.0[lane]);
            product += g * along;
            largest = largest.max(along.abs());
        }
        if largest == 0.0 {
            state.end(EndKind::Converged);
        } else {
            state.set_out(true, FIRST / largest, product, largest, shared.most);
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::landscape::Slot;

    const N: usize = 5;
    const N_STARTS: usize = 40;

    /// A chain of narrow curved valleys (Rosenbrock 1960) with a part that is outside.
    fn value_and_gradient(x: [f64; N]) -> (f64, [f64; N]) {
        let mut gradient = [0.0; N];
        let mut value = 0.0;
        for k in 0..N - 1 {
            let (bend, rest) = (x[k + 1] - x[k] * x[k], 1.0 - x[k]);
            value += 100.0 * bend * bend + rest * rest;
            gradient[k] += -400.0 * bend * x[k] - 2.0 * rest;
            gradient[k + 1] += 200.0 * bend;
        }
        (if x[0] > 1.7 { f64::NAN } else { value }, gradient)
    }

    fn region() -> Arc<Region> {
        let slot = |upper| Slot { lower: -2.0, upper, start_lower: -2.0, start_upper: 2.0, cyclic: false };
        // The third unknown ends at its bound.
        let slots = [2.0, 2.0, 0.6, 2.0, 2.0].map(slot);
        Arc::new(Region::new(&slots, &[]))
    }

    fn start(number: usize) -> [f64; N] {
        std::array::from_fn(|slot| 1.9 * crate::numbers::functions::sine((7 * number + 3 * slot) as f64))
    }

    /// Ends and evaluations of descents from all starts, each lane with the next start as soon as it is free.
    fn descend(lanes: usize, width: usize, build: Build, order: &[usize]) -> Vec<Option<(End, u64)>> {
        let mut descents = Descents::with_build(&region(), lanes, 500, build);
        let mut waiting = order.iter();
        let mut tenants: Vec<Option<usize>> = vec![None; width];
        let mut ends = vec![None; N_STARTS];
        let (mut points, mut gradients) = (vec![0.0; N * width], vec![0.0; N * width]);
        let (mut turns, mut shifts) = (0, 0);
        loop {
            for (lane, place) in tenants.iter_mut().enumerate() {
                if let Some(tenant) = place.filter(|_| descents.has_ended(lane)) {
                    ends[tenant] = Some((descents.end(lane), descents.evaluations(lane)));
                    descents.leave(lane);
                    *place = None;
                }
                // Lane 3 is kept free for those who move in.
                if place.is_none()
                    && (width < 32 || lane != 3)
                    && let Some(&next) = waiting.next()
                {
                    descents.start(lane, &start(next));
                    *place = Some(next);
                }
            }
            if tenants.iter().all(Option::is_none) {
                assert!(width < 32 || shifts > 0);
                return ends;
            }
            turns += 1;
            if width == 32 && turns % 7 == 0 && tenants[20].is_some() && tenants[3].is_none() {
                descents.shift(20, 3);
                tenants.swap(20, 3);
                shifts += 1;
            }
            descents.ask(&mut points);
            let mut values = vec![0.0; width];
            for lane in 0..width {
                let (value, gradient) = value_and_gradient(std::array::from_fn(|slot| points[slot * width + lane]));
                values[lane] = value;
                (0..N).for_each(|slot| gradients[slot * width + lane] = gradient[slot]);
            }
            descents.tell(&points, &values, &gradients);
        }
    }

    /// The bits of a descent do not depend on its lane, its neighbours, who was there before, the width or the build.
    #[test]
    fn lanes_know_nothing_of_each_other() {
        let alone: Vec<_> = (0..N_STARTS).map(|k| descend(8, 8, Build::Baseline, &[k])[k].clone().unwrap()).collect();
        let kinds = |kind| alone.iter().filter(|(end, _)| end.kind == kind).count();
        assert!(kinds(EndKind::Converged) > 20 && kinds(EndKind::Outside) > 2, "{alone:?}");
        assert!(alone.iter().any(|(end, _)| end.at[2] == 0.6), "no descent ends at the bound");
        let upward: Vec<usize> = (0..N_STARTS).collect();
        let mixed: Vec<usize> = (0..N_STARTS).map(|k| (k * 27 + 5) % N_STARTS).collect();
        for build in [Build::Baseline, Build::Avx2, Build::Avx512] {
            for (lanes, width) in [(8, 8), (32, 8), (32, 16), (32, 32)] {
                for order in [&upward, &mixed] {
                    for (number, together) in descend(lanes, width, build, order).into_iter().enumerate() {
                        let (end, evaluations) = together.unwrap();
                        let (other, other_evaluations) = &alone[number];
                        let bits = |end: &End| -> Vec<u64> { end.at.iter().map(|x| x.to_bits()).collect() };
                        assert_eq!((end.kind, bits(&end)), (other.kind, bits(other)), "{build:?}, start {number}");
                        assert_eq!((end.value.to_bits(), evaluations), (other.value.to_bits(), *other_evaluations));
                    }
                }
            }
        }
    }
}
