//! Vector algebra for descents: the same stretch of eight descents side by side, in three builds.
//!
//! A block of eight lanes keeps its vectors slot by slot, eight numbers a slot. Points and gradients are read from the
//! rows of a machine and written to them, so nothing is packed. A lane never looks at another, sums run over the slots in
//! a fixed order and nothing is fused: the bits of a lane depend on its own numbers only, in every build.
//!
//! The limited memory is kept in single precision and measured by the size of the gradient at each step: half the
//! traffic, the same number of steps. What ends are judged by (points, values, gradients, slopes) is in double.
//!
//! Loops over arrays throughout, and no closures: a closure called twice becomes a function of its own, without its
//! build's vector instructions.

use super::Build;

/// Lanes of a block.
pub const BLOCK: usize = 8;

/// One number for each lane of a block.
#[derive(Clone, Copy, Debug, PartialEq)]
#[repr(C, align(64))]
pub struct Lanes(pub [f64; BLOCK]);

/// One number for each lane of a block, in single precision.
#[derive(Clone, Copy, Debug, PartialEq)]
#[repr(C, align(32))]
pub struct Short(pub [f32; BLOCK]);

impl Lanes {
    /// Zeros.
    pub const ZERO: Lanes = Lanes([0.0; BLOCK]);
}

impl Short {
    /// Zeros.
    pub const ZERO: Short = Short([0.0; BLOCK]);
}

/// A block's columns of rows that are `width` lanes wide, to read.
#[derive(Clone, Copy)]
pub struct Columns<'a> {
    /// The rows, one after the other.
    pub rows: &'a [f64],
    /// Lanes of a row.
    pub width: usize,
    /// The first lane of the block.
    pub first: usize,
}

impl Columns<'_> {
    #[inline(always)]
    fn row(&self, slot: usize) -> &[f64; BLOCK] {
        let start = slot * self.width + self.first;
        self.rows[start..start + BLOCK].first_chunk().expect("eight lanes")
    }
}

/// The bounds of every slot.
#[derive(Clone, Copy)]
pub struct Bounds<'a> {
    /// Lower bounds.
    pub lower: &'a [f64],
    /// Upper bounds.
    pub upper: &'a [f64],
}

/// The point and the gradient that each lane of a block has reached, slot by slot; the gradient in scaled units.
pub struct Reached<'a> {
    /// The points.
    pub at: &'a mut [Lanes],
    /// The gradients.
    pub gradient: &'a mut [Lanes],
}

/// What [`Algebra::judge`] reads off a gradient.
pub struct Judged {
    /// The inner product with the direction.
    pub along: Lanes,
    /// The largest element.
    pub largest: Lanes,
    /// 0 where every element is finite, NaN elsewhere.
    pub doubt: Lanes,
}

/// The factors of [`Algebra::accept`], for each lane.
pub struct Acceptance {
    /// Whether the lane accepts its trial: 1 or 0.
    pub taken: Lanes,
    /// What the change of the gradient is multiplied by.
    pub down: Lanes,
    /// What the new gradient is multiplied by; 0 for a lane that does not accept.
    pub unit: Lanes,
}

/// The place of a new pair, and the vector that becomes the direction.
pub struct Pair<'a> {
    /// The step.
    pub step: &'a mut [Short],
    /// The change of the gradient.
    pub change: &'a mut [Short],
    /// The new gradient, measured by its size, without what bounds hold.
    pub work: &'a mut [Short],
    /// With bounds: 0 where one holds the slot, 1 elsewhere.
    pub free: &'a mut [Short],
}

/// What [`Algebra::accept`] sums up.
pub struct Summed {
    /// step . change
    pub curvature: Short,
    /// change . change
    pub square: Short,
    /// step . step
    pub length: Short,
    /// step . work
    pub aim: Short,
    /// The largest element of the new gradient, without what bounds hold.
    pub steepness: Lanes,
}

/// The limited memory of a block.
pub struct Memory<'a> {
    /// Steps: a vector of as many rows as the work has for each pair.
    pub steps: &'a [Short],
    /// Changes, the same way.
    pub changes: &'a [Short],
    /// `1 / (step . change)`, and 0 for a pair that is void.
    pub inverses: &'a [Short],
    /// What the change of each pair was multiplied by; 0 for a pair that is void.
    pub downs: &'a [Lanes],
    /// One over the scale of the inverse curvature.
    pub per_scale: Lanes,
    /// The newest pair.
    pub newest: usize,
}

/// What [`Algebra::direct`] says of the new direction.
pub struct Directed {
    /// Its inner product with the gradient.
    pub slope: Lanes,
    /// Its largest element.
    pub largest: Lanes,
}

/// What [`Algebra::propose`] met: more than 0 where it did.
pub struct Proposed {
    /// A slot was cut at a bound.
    pub cut: Lanes,
    /// A slot stands at a bound.
    pub touched: Lanes,
}

/// The algebra in one build.
#[derive(Clone, Copy, Debug)]
pub struct Algebra {
    pub(super) build: Build,
}

impl Algebra {
    /// The best build that this processor can run.
    pub fn new() -> Self {
        Algebra { build: Build::best() }
    }

    /// A given build; one that the processor cannot run is replaced by the best that it can.
    pub fn with_build(build: Build) -> Self {
        Algebra { build: build.min(Build::best()) }
    }
}

impl Default for Algebra {
    fn default() -> Self {
        Algebra::new()
    }
}

/// A method compiled once for each build.
macro_rules! in_each_build {
    ($(#[$about:meta])* $name:ident($($argument:ident: $kind:ty),* $(,)?) -> $result:ty $body:block) => {
        impl Algebra {
            $(#[$about])*
            #[allow(clippy::too_many_arguments, reason = "slices of one block, which its owner lends apart")]
            pub fn $name(&self, $($argument: $kind),*) -> $result {
                #[inline(always)]
                fn here($($argument: $kind),*) -> $result $body
                #[cfg(target_arch = "x86_64")]
                #[target_feature(enable = "avx512f,avx512dq,avx512vl")]
                fn avx512($($argument: $kind),*) -> $result {
                    here($($argument),*)
                }
                #[cfg(target_arch = "x86_64")]
                #[target_feature(enable = "avx2")]
                fn avx2($($argument: $kind),*) -> $result {
                    here($($argument),*)
                }
                #[cfg(target_arch = "x86_64")]
                match self.build {
                    // SAFETY: `Build::best` has seen that the processor has these features, and no better build is ever
                    // kept.
                    Build::Avx512 => return unsafe { avx512($($argument),*) },
                    // SAFETY: as above.
                    Build::Avx2 => return unsafe { avx2($($argument),*) },
                    Build::Baseline => {}
                }
                here($($argument),*)
            }
        }
    };
}
pub(super) use in_each_build;

/// An array, lane by lane.
macro_rules! each {
    ($lane:ident => $value:expr) => {{
        let mut all = [Default::default(); BLOCK];
        for $lane in 0..BLOCK {
            all[$lane] = $value;
        }
        all
    }};
}

in_each_build! {
    /// Looks at fresh gradients (in the unknowns' own units) along the directions.
    judge(gradients: Columns<'_>, scale: &[f64], direction: &[Short]) -> Judged {
        let (mut along, mut largest, mut doubt) = ([0.0; BLOCK], [0.0; BLOCK], [0.0; BLOCK]);
        for (slot, (&scale, direction)) in scale.iter().zip(direction).enumerate() {
            let raw = gradients.row(slot);
            let g: [f64; BLOCK] = each!(lane => raw[lane] * scale);
            let direction: [f64; BLOCK] = each!(lane => f64::from(direction.0[lane]));
            along = each!(lane => along[lane] + g[lane] * direction[lane]);
            let size: [f64; BLOCK] = each!(lane => g[lane].abs());
            largest = each!(lane => if size[lane] > largest[lane] { size[lane] } else { largest[lane] });
            doubt = each!(lane => doubt[lane] + g[lane] * 0.0);
        }
        Judged { along: Lanes(along), largest: Lanes(largest), doubt: Lanes(doubt) }
    }
}

in_each_build! {
    /// What the gradients reached expect of the moves to the points, which bounds have cut.
    expect(points: Columns<'_>, at: &[Lanes], gradient: &[Lanes], inverse_scale: &[f64]) -> Lanes {
        let mut sum = [0.0; BLOCK];
        for (slot, ((at, gradient), &inverse)) in at.iter().zip(gradient).zip(inverse_scale).enumerate() {
            let point = points.row(slot);
            sum = each!(lane => sum[lane] + (point[lane] - at.0[lane]) * inverse * gradient.0[lane]);
        }
        Lanes(sum)
    }
}

in_each_build! {
    /// Moves the lanes that accept their trials to the points, with the gradients there (in the unknowns' own units), and
    /// writes the pair of step and change; zeros for the others. With bounds, a slot that one holds is 0 in the work.
    accept(
        points: Columns<'_>,
        gradients: Columns<'_>,
        scales: (&[f64], &[f64]),
        bounds: Option<Bounds<'_>>,
        how: &Acceptance,
        reached: Reached<'_>,
        pair: Pair<'_>,
    ) -> Summed {
        match bounds {
            Some(bounds) => accept_here::<true>(points, gradients, scales, bounds, how, reached, pair),
            None => {
                accept_here::<false>(points, gradients, scales, Bounds { lower: &[], upper: &[] }, how, reached, pair)
            }
        }
    }
}

#[inline(always)]
fn accept_here<const HOLD: bool>(
    points: Columns<'_>,
    gradients: Columns<'_>,
    (scale, inverse_scale): (&[f64], &[f64]),
    bounds: Bounds<'_>,
    how: &Acceptance,
    reached: Reached<'_>,
    pair: Pair<'_>,
) -> Summed {
    let Acceptance { taken: Lanes(taken), down: Lanes(down), unit: Lanes(unit) } = *how;
    let (mut curvature, mut square, mut length) = ([0.0_f32; BLOCK], [0.0_f32; BLOCK], [0.0_f32; BLOCK]);
    let mut aim = [0.0_f32; BLOCK];
    let mut steepness = [0.0; BLOCK];
    let free = pair.free;
    let (work, padding) = pair.work.split_at_mut(scale.len());
    padding.fill(Short::ZERO);
    let vectors = reached.at.iter_mut().zip(reached.gradient);
    let pairs = pair.step.iter_mut().zip(pair.change).zip(work);
    let scales = scale.iter().zip(inverse_scale);
    for (slot, (((at, gradient), ((step, change), work)), (&scale, &inverse))) in
        vectors.zip(pairs).zip(scales).enumerate()
    {
        // Copied before anything is chosen from them: a choice between two places in memory would go lane by lane.
        let (point, raw) = (*points.row(slot), *gradients.row(slot));
        let (before, slope) = (at.0, gradient.0);
        let g: [f64; BLOCK] = each!(lane => raw[lane] * scale);
        let x: [f64; BLOCK] = each!(lane => if taken[lane] > 0.0 { point[lane] } else { before[lane] });
        let g: [f64; BLOCK] = each!(lane => if taken[lane] > 0.0 { g[lane] } else { slope[lane] });
        at.0 = x;
        gradient.0 = g;
        // Zeros where nothing is taken.
        let moved: [f32; BLOCK] = each!(lane => ((x[lane] - before[lane]) * inverse) as f32);
        let changed: [f32; BLOCK] = each!(lane => ((g[lane] - slope[lane]) * down[lane]) as f32);
        step.0 = moved;
        change.0 = changed;
        curvature = each!(lane => curvature[lane] + moved[lane] * changed[lane]);
        square = each!(lane => square[lane] + changed[lane] * changed[lane]);
        length = each!(lane => length[lane] + moved[lane] * moved[lane]);
        let mut moving = g;
        if HOLD {
            let (lower, upper) = (bounds.lower[slot], bounds.upper[slot]);
            let held: [bool; BLOCK] =
                each!(lane => (x[lane] <= lower) & (g[lane] >= 0.0) | (x[lane] >= upper) & (g[lane] <= 0.0));
            let share: [f64; BLOCK] = each!(lane => if held[lane] { 0.0 } else { 1.0 });
            moving = each!(lane => g[lane] * share[lane]);
            free[slot].0 = each!(lane => share[lane] as f32);
        }
        let size: [f64; BLOCK] = each!(lane => moving[lane].abs());
        steepness = each!(lane => if size[lane] > steepness[lane] { size[lane] } else { steepness[lane] });
        let measured: [f32; BLOCK] = each!(lane => (moving[lane] * unit[lane]) as f32);
        work.0 = measured;
        aim = each!(lane => aim[lane] + moved[lane] * measured[lane]);
    }
    Summed {
        curvature: Short(curvature),
        square: Short(square),
        length: Short(length),
        aim: Short(aim),
        steepness: Lanes(steepness),
    }
}

in_each_build! {
    /// Turns the work (gradients) into the remembered inverse curvature times it, up to the scale of the newest pair: the
    /// two-loop recursion (Nocedal 1980), given the product of the newest step with the work. Lanes that accepted get it as their direction, 0 where a bound holds.
    direct(
        memory: &Memory<'_>,
        aim: &Short,
        gradient: &[Lanes],
        free: Option<&[Short]>,
        taken: &Lanes,
        work: &mut [Short],
        direction: &mut [Short],
    ) -> Directed {
        let last = recurse(memory, aim, work);
        match free {
            Some(free) => finish::<true>(gradient, free, taken, work, last, direction),
            None => finish::<false>(gradient, &[], taken, work, last, direction),
        }
    }
}

/// The most pairs that a memory may have.
pub const MOST_PAIRS: usize = 20;

/// All of the recursion but the last sum, whose factor and vector it gives.
#[inline(always)]
fn recurse<'a>(memory: &Memory<'a>, aim: &Short, work: &mut [Short]) -> ([f32; BLOCK], &'a [Short]) {
    let n_pairs = memory.inverses.len().min(MOST_PAIRS);
    let n = work.len();
    let mut weights = [[0.0_f32; BLOCK]; MOST_PAIRS];
    // One loop over all passes, so that the body is there once: each adds a multiple of one vector to the work and
    // multiplies the result with the vector of the next pass.
    let mut factor = [0.0_f32; BLOCK];
    let mut place = memory.newest;
    let mut added = &memory.changes[place * n..][..n];
    for pass in 0..2 * n_pairs {
        let forward = pass < n_pairs;
        let other = if forward { &memory.steps[place * n..][..n] } else { &memory.changes[place * n..][..n] };
        let product = if pass == 0 { aim.0 } else { add_and_multiply(work, factor, added, other) };
        let inverse = memory.inverses[place].0;
        if forward {
            let weight: [f32; BLOCK] = each!(lane => inverse[lane] * product[lane]);
            factor = each!(lane => -weight[lane]);
            weights[place] = weight;
            added = &memory.changes[place * n..][..n];
            if pass + 1 < n_pairs {
                place = if place == 0 { n_pairs - 1 } else { place - 1 };
            }
        } else {
            let (weight, down) = (weights[place], memory.downs[place].0);
            let ratio: [f64; BLOCK] = each!(lane => down[lane] * memory.per_scale.0[lane]);
            let ratio: [f32; BLOCK] = each!(lane => ratio[lane] as f32);
            factor = each!(lane => weight[lane] * ratio[lane] - inverse[lane] * product[lane]);
            added = &memory.steps[place * n..][..n];
            place = if place + 1 == n_pairs { 0 } else { place + 1 };
        }
    }
    (factor, added)
}

/// `work += factor * added`, and then the inner product of the work with the other: even and odd slots apart, since one
/// sum would wait for itself.
#[inline(always)]
fn add_and_multiply(work: &mut [Short], factor: [f32; BLOCK], added: &[Short], other: &[Short]) -> [f32; BLOCK] {
    let (mut even, mut odd) = ([0.0_f32; BLOCK], [0.0_f32; BLOCK]);
    for ((work, added), other) in work.chunks_exact_mut(2).zip(added.chunks_exact(2)).zip(other.chunks_exact(2)) {
        let (a, b) = (work[0].0, work[1].0);
        let a: [f32; BLOCK] = each!(lane => a[lane] + factor[lane] * added[0].0[lane]);
        let b: [f32; BLOCK] = each!(lane => b[lane] + factor[lane] * added[1].0[lane]);
        work[0].0 = a;
        work[1].0 = b;
        even = each!(lane => even[lane] + a[lane] * other[0].0[lane]);
        odd = each!(lane => odd[lane] + b[lane] * other[1].0[lane]);
    }
    each!(lane => even[lane] + odd[lane])
}

#[inline(always)]
fn finish<const HOLD: bool>(
    gradient: &[Lanes],
    free: &[Short],
    taken: &Lanes,
    work: &[Short],
    (factor, added): ([f32; BLOCK], &[Short]),
    direction: &mut [Short],
) -> Directed {
    let (mut slope, mut largest) = ([0.0; BLOCK], [0.0_f32; BLOCK]);
    let taken: [f32; BLOCK] = each!(lane => taken.0[lane] as f32);
    let sums = work.iter().zip(added);
    for (slot, ((gradient, (work, added)), direction)) in gradient.iter().zip(sums).zip(direction).enumerate() {
        let (g, old) = (gradient.0, direction.0);
        let mut along: [f32; BLOCK] = each!(lane => work.0[lane] + factor[lane] * added.0[lane]);
        if HOLD {
            let share = free[slot].0;
            along = each!(lane => along[lane] * share[lane]);
        }
        let size: [f32; BLOCK] = each!(lane => along[lane].abs());
        largest = each!(lane => if size[lane] > largest[lane] { size[lane] } else { largest[lane] });
        direction.0 = each!(lane => if taken[lane] > 0.0 { along[lane] } else { old[lane] });
        let along: [f64; BLOCK] = each!(lane => f64::from(along[lane]));
        slope = each!(lane => slope[lane] + g[lane] * along[lane]);
    }
    Directed { slope: Lanes(slope), largest: Lanes(each!(lane => f64::from(largest[lane]))) }
}

in_each_build! {
    /// Writes the trial points into a block's columns: the points reached plus so much of the direction, cut at the
    /// bounds. Lanes that are not under way (0) keep what stands there.
    propose(
        at: &[Lanes],
        direction: &[Short],
        scale: &[f64],
        bounds: Option<Bounds<'_>>,
        reach: &Lanes,
        under_way: &Lanes,
        points: (&mut [f64], usize, usize),
    ) -> Proposed {
        match bounds {
            Some(bounds) => propose_here::<true>(at, direction, scale, bounds, reach, under_way, points),
            None => {
                propose_here::<false>(at, direction, scale, Bounds { lower: &[], upper: &[] }, reach, under_way, points)
            }
        }
    }
}

#[inline(always)]
fn propose_here<const BOUNDED: bool>(
    at: &[Lanes],
    direction: &[Short],
    scale: &[f64],
    bounds: Bounds<'_>,
    reach: &Lanes,
    under_way: &Lanes,
    (rows, width, first): (&mut [f64], usize, usize),
) -> Proposed {
    let (Lanes(reach), Lanes(under_way)) = (*reach, *under_way);
    let (mut cut, mut touched) = ([0.0; BLOCK], [0.0; BLOCK]);
    for (slot, ((at, direction), &scale)) in at.iter().zip(direction).zip(scale).enumerate() {
        let start = slot * width + first;
        let row: &mut [f64; BLOCK] = rows[start..start + BLOCK].first_chunk_mut().expect("eight lanes");
        let along: [f64; BLOCK] = each!(lane => f64::from(direction.0[lane]));
        let mut x: [f64; BLOCK] = each!(lane => at.0[lane] + reach[lane] * along[lane] * scale);
        if BOUNDED {
            let (lower, upper) = (bounds.lower[slot], bounds.upper[slot]);
            let above: [f64; BLOCK] = each!(lane => if x[lane] > lower { x[lane] } else { lower });
            let inside: [f64; BLOCK] = each!(lane => if above[lane] < upper { above[lane] } else { upper });
            cut = each!(lane => if inside[lane] != x[lane] { 1.0 } else { cut[lane] });
            touched =
                each!(lane => if (inside[lane] <= lower) | (inside[lane] >= upper) { 1.0 } else { touched[lane] });
            x = inside;
        }
        let old = *row;
        *row = each!(lane => if under_way[lane] > 0.0 { x[lane] } else { old[lane] });
    }
    Proposed { cut: Lanes(cut), touched: Lanes(touched) }
}
