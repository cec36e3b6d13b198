//! Random landscapes through the whole kernel: values against the plain evaluator of terms, gradients against duals of the
//! value and differences, curvatures against duals of the gradient, lanes against the reference to the bit.

use std::sync::Arc;

use rand::RngExt;
use rand_chacha::ChaCha8Rng;

use crate::base::random::{Purpose, stream};
use crate::kernel::lower::lower_value;
use crate::kernel::reference::{interpret, rows};
use crate::kernel::{LaneMachine, Role, Verified, compile};
use crate::landscape::{Landscape, check};
use crate::language::{parse, render};
use crate::numbers::algebra::Dual;

const INDICES: [&str; 4] = ["i", "j", "k", "l"];

struct Author {
    random: ChaCha8Rng,
    /// Let families and functions that may be used so far.
    families: usize,
    functions: usize,
    /// Whether kinks and choices by unknowns are left out, so that differences can judge.
    smooth: bool,
}

impl Author {
    fn problem(seed: u64) -> String {
        let random = stream(seed, 7, 0, Purpose::Check);
        let mut author = Author { random, families: 0, functions: 0, smooth: seed.is_multiple_of(3) };
        let mut text =
            "given n = 4\ngiven w = [0.5, -1.25, 2, 0.75]\ngiven next = [2, 2, 4, 1]\ngiven kind = [1, 2, 1, 2]\n\
                        unknown x[n] in [-1.5, 1.5]\nunknown p[n, 2] in [-1, 2]\nunknown a in [0.25, 2]\n"
                .to_string();
        for number in 0..author.below(3) {
            let body = author.expression(2, 0, true);
            text += &format!("let h{number}(u, v) = {body}\n");
            author.functions += 1;
        }
        for number in 0..author.below(3) {
            let body = author.expression(3, 1, false);
            text += &format!("let f{number}[i in 1..n] = {body}\n");
            author.families += 1;
        }
        let (shared, objective) = (author.expression(2, 0, false), author.expression(4, 0, false));
        text += &format!("let c = {shared}\n");
        let (scale, more) = (author.expression(2, 0, false), author.reduction("sum", 3, 0, false));
        text + &format!("minimise {objective} + c*tanh({scale}) + {more} + a*sum(i in 1..n: x[i]*p[i,1]) + c^2\n")
    }

    fn below(&mut self, count: usize) -> usize {
        self.random.random_range(0..count)
    }

    fn pick<'a>(&mut self, all: &[&'a str]) -> &'a str {
        all[self.below(all.len())]
    }

    /// An index between 1 and 4.
    fn index(&mut self, bound: usize) -> String {
        let index = if bound == 0 { String::new() } else { INDICES[self.below(bound)].to_string() };
        match self.below(7) {
            0 => (1 + self.below(4)).to_string(),
            _ if bound == 0 => (1 + self.below(4)).to_string(),
            1 => format!("next[{index}]"),
            2 => format!("5 - {index}"),
            3 => format!("1 + floor(({index} - 1)/2)"),
            _ => index,
        }
    }

    fn leaf(&mut self, bound: usize, parameters: bool) -> String {
        let index = self.index(bound);
        match self.below(if bound > 0 { 10 } else { 8 }) {
            _ if parameters && self.below(2) == 0 => self.pick(&["u", "v"]).to_string(),
            0 | 1 => format!("x[{index}]"),
            2 => format!("p[{index}, 1]"),
            3 => format!("p[{index}, 2]"),
            4 => "a".to_string(),
            5 if self.families > 0 => format!("f{}[{index}]", self.below(self.families)),
            6 => format!("w[{index}]"),
            8 => INDICES[self.below(bound)].to_string(),
            9 => format!("(x[{index}] - x[{}])", self.index(bound)),
            _ => format!("{:.3}", self.random.random_range(-2.0..2.0)),
        }
    }

    fn expression(&mut self, depth: usize, bound: usize, parameters: bool) -> String {
        if depth == 0 {
            return self.leaf(bound, parameters);
        }
        let part = |author: &mut Self| {
            let depth = if author.below(4) == 0 { 0 } else { depth - 1 };
            author.expression(depth, bound, parameters)
        };
        let mut choice = self.below(30);
        while self.smooth && [8, 10, 11, 12, 18, 19, 20, 21, 22].contains(&choice) {
            choice = self.below(30);
        }
        let (e, f) = (part(self), part(self));
        match choice {
            0 | 1 => format!("({e} + {f})"),
            2 => format!("({e} - {f})"),
            3 | 4 => format!("{e}*{f}"),
            5 => format!("{e}/(1 + ({f})^2)"),
            6 => format!("(-({e}))"),
            7 => format!("({e})^{}", self.pick(&["2", "3", "4", "1", "0"])),
            8 => format!("(0.5 + abs({e}))^{}", self.pick(&["-1", "-3", "0.5", "-0.5", "1.5", "2.25"])),
            9 => format!("(0.5 + ({e})^2)^tanh({f})"),
            10 => format!("min({e}, {f})"),
            11 => format!("max({e}, {f}, 0.1)"),
            12 => format!("abs({e})"),
            13 => format!("atan2({e}, 1.5 + tanh({f}))"),
            14 => format!("hypot({e}, 0.3 + ({f})^2)"),
            15 => {
                let name = self.pick(&["sin", "cos", "tanh", "erf", "atan"]);
                format!("{name}({e})")
            }
            16 => {
                let name = self.pick(&["exp", "sinh", "cosh", "tan", "asin", "acos"]);
                format!("{name}(0.9*tanh({e}))")
            }
            17 => {
                let name = self.pick(&["sqrt", "log", "log10"]);
                format!("{name}(0.2 + ({e})^2)")
            }
            18 => {
                let name = self.pick(&["floor", "sign"]);
                format!("{name}({e})*{f}")
            }
            // A branch that is outside its domain where it is not taken.
            19 => format!("(if {f} > 0 then sqrt({f})*{e} else {e})"),
            20 => format!("(if {e} > 0.01 then log({e})/({e}) else {f})"),
            21 | 22 => {
                let condition = self.condition(depth, bound, parameters);
                format!("(if {condition} then {e} else {f})")
            }
            23 if bound > 0 => {
                let (index, condition) = (INDICES[self.below(bound)], self.index_condition(bound));
                let other = format!("x[{index} - 1]");
                if self.below(2) == 0 {
                    format!("(if {index} > 1 then {other}*{e} else {f})")
                } else {
                    format!("(if {condition} then {e} else {f})")
                }
            }
            24 if self.functions > 0 && !parameters => format!("h{}({e}, {f})", self.below(self.functions)),
            25 if self.smooth => self.pick(&["sum(x)", "norm(x + a*x)", "dot(p[1], p[2])"]).to_string(),
            25 => self.pick(&["max(x)", "min(x)", "min(p)"]).to_string(),
            _ if bound < 3 && !parameters => {
                let all = ["sum", "sum", "sum", "product", "min", "max"];
                let operator = self.pick(if self.smooth { &all[..4] } else { &all });
                self.reduction(operator, depth - 1, bound, parameters)
            }
            _ => e,
        }
    }

    fn reduction(&mut self, operator: &str, depth: usize, bound: usize, parameters: bool) -> String {
        let mut ranges = Vec::new();
        let mut inner = bound;
        for _ in 0..1 + self.below(2) {
            let name = INDICES[inner];
            let outer = if inner > 0 { INDICES[self.below(inner)] } else { "1" };
            ranges.push(match self.below(7) {
                0 => format!("{name} in {outer}..n"),
                1 => format!("{name} in {outer}+1..n"),
                2 => format!("{name} in 1..{outer}"),
                3 => format!("{name} in 1..next[{outer}]"),
                4 if self.below(3) == 0 => format!("{name} in 3..2"),
                _ => format!("{name} in 1..n"),
            });
            inner += 1;
            if inner == 4 {
                break;
            }
        }
        let condition = if self.below(3) == 0 { format!(" if {}", self.index_condition(inner)) } else { String::new() };
        let body = self.expression(depth, inner, parameters);
        // Over nothing, minima and maxima are infinite: one more part keeps them at hand.
        match operator {
            "min" | "max" => format!(
                "{operator}({operator}({}{condition}: {body}), {body_0})",
                ranges.join(", "),
                body_0 = self.leaf(bound, parameters)
            ),
            "product" => format!("product({}{condition}: 0.8 + 0.4*tanh({body}))", ranges.join(", ")),
            _ => format!("{operator}({}{condition}: {body})", ranges.join(", ")),
        }
    }

    fn index_condition(&mut self, bound: usize) -> String {
        let (i, j) = (INDICES[self.below(bound)], INDICES[self.below(bound)]);
        match self.below(6) {
            0 => format!("{i} != {j}"),
            1 => format!("kind[{i}] == kind[{j}]"),
            2 => format!("{i} < {j} and kind[{i}] == 1"),
            3 => format!("not ({i} == 2 or {j} > 3)"),
            4 => format!("{i} >= 2"),
            _ => format!("w[{i}] > 0.6"),
        }
    }

    fn condition(&mut self, depth: usize, bound: usize, parameters: bool) -> String {
        let mut side = || self.expression(depth.min(2) - 1, bound, parameters);
        let (a, b, c) = (side(), side(), side());
        match self.below(5) {
            0 => format!("{a} < {b}"),
            1 => format!("{a} >= {b} and {c} < 0.5"),
            2 => format!("{a} > 0.5 or {b} < {c}"),
            3 => format!("not ({a} <= {b})"),
            _ => format!("{a} != {b}"),
        }
    }
}

fn landscape(text: &str) -> Landscape {
    let parsed = parse(text);
    assert!(parsed.diagnostics.is_empty(), "{}", render("random.land", text, &parsed.diagnostics));
    let checked = check(&parsed.file, &[]).unwrap();
    checked.landscape.unwrap_or_else(|| panic!("{}\n{text}", render("random.land", text, &checked.diagnostics)))
}

fn duals(at: &[f64], direction: usize) -> Vec<Dual> {
    let slope = |slot: usize| if slot == direction { 1.0 } else { 0.0 };
    at.iter().enumerate().map(|(slot, &value)| Dual { value, slope: slope(slot) }).collect()
}

fn near(a: f64, b: f64, scale: f64, tolerance: f64) -> bool {
    (a - b).abs() <= tolerance * scale || a.is_nan() && b.is_nan() || a == b
}

fn lanes_agree(program: &Arc<Verified>, inputs: &[Vec<f64>], roles: &[Role], text: &str) {
    let bits = |x: f64| if x.is_nan() { u64::MAX } else { x.to_bits() };
    let directions: Vec<Vec<f64>> = (0..inputs.len()).map(|k| inputs[(k + 1) % inputs.len()].clone()).collect();
    for lanes in [4, 8, 16, 32] {
        let mut machine = LaneMachine::new(program, lanes);
        let pick = |lane: usize| lane % inputs.len();
        for (role, values) in [(Role::Unknowns, inputs), (Role::Direction, &directions[..])] {
            let rows = machine.rows_mut(role);
            if !rows.is_empty() {
                for lane in 0..lanes {
                    values[pick(lane)].iter().enumerate().for_each(|(slot, &x)| rows[slot * lanes + lane] = x);
                }
            }
        }
        machine.run();
        for lane in 0..lanes.min(inputs.len()) {
            let given =
                [(Role::Unknowns, inputs[pick(lane)].clone()), (Role::Direction, directions[pick(lane)].clone())];
            let buffers = interpret(program.program(), &given);
            for &role in roles {
                let expected: Vec<u64> = rows(program.program(), &buffers, role).iter().map(|&x| bits(x)).collect();
                let got: Vec<u64> = machine.rows(role).iter().skip(lane).step_by(lanes).map(|&x| bits(x)).collect();
                assert_eq!(got, expected, "{role:?}, {lanes} lanes, lane {lane}\n{text}\n{}", program.program());
            }
        }
    }
}

#[test]
fn random_landscapes_are_what_they_say() {
    let (mut n_checked, mut n_differences, mut n_all) = (0, 0, 0);
    for seed in 0..COUNT {
        let text = Author::problem(seed);
        let landscape = landscape(&text);
        let kernel = compile(&landscape).unwrap_or_else(|error| panic!("{error}\n{text}"));
        let n = landscape.n_unknowns();
        let mut random = stream(seed, 8, 0, Purpose::Check);
        let points: Vec<Vec<f64>> = (0..6)
            .map(|_| landscape.slots.iter().map(|slot| random.random_range(slot.lower..slot.upper)).collect())
            .collect();
        let value_program = lower_value(&landscape);
        let gradient_program = kernel.gradient.program();
        for at in &points {
            n_all += 1;
            let buffers = interpret(gradient_program, &[(Role::Unknowns, at.clone())]);
            let value = rows(gradient_program, &buffers, Role::Value)[0];
            let gradient = rows(gradient_program, &buffers, Role::Gradient);
            let plain = landscape.evaluate_term(landscape.objective, at);
            assert!(near(value, plain, plain.abs().max(1.0), 1e-9), "seed {seed}: {value} for {plain}\n{text}");
            if !value.is_finite() || value.abs() > 1e6 {
                continue;
            }
            let slopes: Vec<f64> = (0..n)
                .map(|direction| {
                    let buffers = interpret(&value_program, &[(Role::Unknowns, duals(at, direction))]);
                    rows(&value_program, &buffers, Role::Value)[0].slope
                })
                .collect();
            let size = slopes.iter().filter(|slope| slope.is_finite()).fold(1.0_f64, |size, g| size.max(g.abs()));
            if size > 1e6 {
                continue;
            }
            n_checked += 1;
            for (slot, (a, b)) in gradient.iter().zip(&slopes).enumerate() {
                assert!(near(*a, *b, size, 1e-9), "seed {seed}, slot {slot}: gradient {a} for {b}\n{text}");
            }
            if !landscape.kinked {
                n_differences += 1;
                for slot in 0..n {
                    let moved = |by: f64| {
                        let mut moved = at.clone();
                        moved[slot] += by;
                        landscape.evaluate_term(landscape.objective, &moved)
                    };
                    let error = [1e-3, 1e-4, 1e-5].map(|h| {
                        let (near, far) =
                            ((moved(h) - moved(-h)) / (2.0 * h), (moved(2.0 * h) - moved(-2.0 * h)) / (4.0 * h));
                        (near + (near - far) / 3.0 - gradient[slot]).abs()
                    });
                    let least = error.into_iter().fold(f64::INFINITY, f64::min);
                    assert!(least < 1e-6 * size.max(value.abs()), "seed {seed}, slot {slot}: off by {error:?}\n{text}");
                }
            }
            for direction in 0..n {
                let given = duals(at, direction);
                let buffers = interpret(gradient_program, &[(Role::Unknowns, given.clone())]);
                let expected: Vec<f64> =
                    rows(gradient_program, &buffers, Role::Gradient).iter().map(|dual| dual.slope).collect();
                let program = kernel.curvature.program();
                let unit = given.iter().map(|dual| dual.slope).collect();
                let buffers = interpret(program, &[(Role::Unknowns, at.clone()), (Role::Direction, unit)]);
                let size = expected.iter().filter(|x| x.is_finite()).fold(1.0_f64, |size, x| size.max(x.abs()));
                for (slot, (a, b)) in rows(program, &buffers, Role::Curvature).iter().zip(&expected).enumerate() {
                    assert!(
                        near(*a, *b, size, 1e-8),
                        "seed {seed}, slot {slot}, direction {direction}: curvature {a} for {b} at {at:?}\n{text}"
                    );
                }
            }
        }
        lanes_agree(&kernel.gradient, &points, &[Role::Value, Role::Gradient], &text);
        lanes_agree(&kernel.curvature, &points, &[Role::Value, Role::Gradient, Role::Curvature], &text);
    }
    // Most points must have been worth the comparison.
    assert!(2 * n_checked > n_all && 10 * n_differences > n_all, "{n_checked} and {n_differences} of {n_all}");
}

const COUNT: u64 = 120;
