//! Landscapes with a published lowest value, written in the landscape language: clouds of atoms, polymers, and the
//! general set. Sources beside each.

use std::f64::consts::FRAC_PI_2;
use std::fmt::Write as _;

use rand::RngExt;
use thalweg::base::random::{Purpose, stream};

/// A landscape with what is known of it.
pub struct Case {
    /// Its name in tables.
    pub name: String,
    /// The problem.
    pub text: String,
    /// The lowest value known.
    pub lowest: f64,
    /// How near a value must come to count as having met it.
    pub tolerance: f64,
    /// Evaluations after which a seed has failed.
    pub most: u64,
    /// The mean that the default mix should not exceed, where one is set.
    pub goal: Option<u64>,
}

/// All of them.
pub fn all() -> Vec<Case> {
    let mut cases: Vec<Case> =
        [(13, -44.326801, 3_000), (31, -133.586422, 30_000), (38, -173.928427, 60_000), (75, -397.492331, 0)]
            .into_iter()
            .map(|(n, lowest, goal)| cluster(n, lowest, goal))
            .collect();
    cases.extend([polymer(13, "ABBABBABABBAB", -3.2941), polymer(21, "BABABBABABBABBABABBAB", -6.1980)]);
    for function in general() {
        if let Some(rotated) = function.rotated() {
            cases.extend([function.plain(), rotated]);
        } else {
            cases.push(function.plain());
        }
    }
    cases
}

/// Atoms with the pair energy of Lennard-Jones; lowest energies as in `tests/data/published/lennard_jones.csv`.
pub fn cluster(n: usize, lowest: f64, goal: u64) -> Case {
    // A start region of usual density: it need not hold the answer, but must not be a crowd.
    let half_width = if n <= 13 { 2.5 } else { (n as f64 / 0.8).cbrt() / 1.6 + 1.0 };
    Case {
        name: format!("cluster{n}"),
        text: format!(
            "unknown p[{n}, 3] in [-{w}, {w}] \nalike shift p, rotate p, mirror p, exchange p\n\
             let s(i, j) = sum(k in 1..3: (p[i,k] - p[j,k])^2)\n\
             minimise sum(i in 1..{n}, j in i+1..{n}: 4*(s(i,j)^-6 - s(i,j)^-3))\n",
            w = half_width
        ),
        lowest,
        tolerance: 1e-5,
        most: if n > 60 { 3_000_000 } else { 1_000_000 },
        goal: (goal > 0).then_some(goal),
    }
}

/// The two-letter polymer in the plane (Stillinger, Head-Gordon and Hirshfeld 1993); lowest energies published to four
/// decimals, from memory, recomputed.
pub fn polymer(n: usize, letters: &str, lowest: f64) -> Case {
    let kinds: Vec<&str> = letters.chars().map(|letter| if letter == 'A' { "1" } else { "-1" }).collect();
    let text = format!(
        "given n = {n}\ngiven kind = [{}]\nunknown bend[i in 2..n-1] in [-pi, pi] cyclic\nalike flip bend\n\
         let way[i in 1..n-1] = sum(k in 2..i: bend[k])\n\
         let x[i in 1..n] = sum(k in 1..i-1: cos(way[k]))\nlet y[i in 1..n] = sum(k in 1..i-1: sin(way[k]))\n\
         let s(i, j) = (x[i] - x[j])^2 + (y[i] - y[j])^2\n\
         let c(i, j) = (1 + kind[i] + kind[j] + 5*kind[i]*kind[j])/8\n\
         minimise sum(i in 2..n-1: (1 - cos(bend[i]))/4) + \
         4*sum(i in 1..n-2, j in i+2..n: s(i,j)^-6 - c(i,j)*s(i,j)^-3)\n",
        kinds.join(", ")
    );
    let most = if n <= 13 { 1_000_000 } else { 3_000_000 };
    Case { name: format!("polymer{n}"), text, lowest, tolerance: 5e-5, most, goal: None }
}

/// A function of the general set. Formulas, bounds and lowest values: from memory, recomputed.
pub struct Function {
    name: &'static str,
    n: usize,
    bounds: (f64, f64),
    /// Definitions before the objective.
    givens: String,
    /// The objective of `y[1..n]`.
    objective: &'static str,
    lowest: f64,
    /// Where the lowest value is; the rotated copy turns about it.
    place: Vec<f64>,
    /// Whether the formula falls below its lowest value outside the bounds, so that the rotated copy must not go there.
    fenced: bool,
    goal: u64,
}

impl Function {
    /// As published.
    pub fn plain(&self) -> Case {
        let (lower, upper) = self.bounds;
        let text = format!("unknown y[{}] in [{lower}, {upper}]\n{}minimise {}\n", self.n, self.givens, self.objective);
        self.case(self.name.to_string(), text, Some(self.goal))
    }

    /// Turned by a fixed random rotation about its lowest place; `None` for one or two unknowns. Where the formula falls
    /// lower beyond the bounds, squares of what lies beyond are added, so that the lowest value stays what it is.
    pub fn rotated(&self) -> Option<Case> {
        if self.n < 3 {
            return None;
        }
        let n = self.n;
        let (lower, upper) = self.bounds;
        let mut text = format!("unknown x[{n}] in [{lower}, {upper}]\n{}given turn = [", self.givens);
        for (row, entries) in rotation(n).iter().enumerate() {
            let entries: Vec<String> = entries.iter().map(f64::to_string).collect();
            let comma = if row == 0 { "" } else { ", " };
            write!(text, "{comma}[{}]", entries.join(", ")).expect("a string");
        }
        let place: Vec<String> = self.place.iter().map(f64::to_string).collect();
        write!(
            text,
            "]\ngiven place = [{}]\nlet y[i in 1..{n}] = place[i] + sum(k in 1..{n}: turn[i, k]*(x[k] - place[k]))\n",
            place.join(", ")
        )
        .expect("a string");
        let fence = if self.fenced {
            format!(" + sum(i in 1..{n}: max(0, y[i] - {upper})^2 + max(0, {lower} - y[i])^2)")
        } else {
            String::new()
        };
        writeln!(text, "minimise {}{fence}", self.objective).expect("a string");
        Some(self.case(format!("{}-turned", self.name), text, None))
    }

    fn case(&self, name: String, text: String, goal: Option<u64>) -> Case {
        Case { name, text, lowest: self.lowest, tolerance: 1e-8, most: 1_000_000, goal }
    }
}

/// The general set.
pub fn general() -> Vec<Function> {
    let michalewicz = vec![
        2.202905519,
        1.570796324,
        1.28499157,
        1.923058468,
        1.720469772,
        FRAC_PI_2,
        1.454413971,
        1.756086521,
        1.655717417,
        FRAC_PI_2,
    ];
    let function = |name, n, bounds, objective, lowest, place, goal| Function {
        name,
        n,
        bounds,
        givens: String::new(),
        objective,
        lowest,
        place,
        fenced: false,
        goal,
    };
    let rastrigin = "sum(i in 1..count(y): y[i]^2 - 10*cos(2*pi*y[i]) + 10)";
    let griewank = "1 + sum(i in 1..10: y[i]^2)/4000 - product(i in 1..10: cos(y[i]/sqrt(i)))";
    let ackley = "20 + e - 20*exp(-0.2*sqrt(sum(i in 1..30: y[i]^2)/30)) - exp(sum(i in 1..30: cos(2*pi*y[i]))/30)";
    let shubert = "product(j in 1..2: sum(i in 1..5: i*cos((i + 1)*y[j] + i)))";
    let eggholder = "-(y[2] + 47)*sin(sqrt(abs(y[2] + y[1]/2 + 47))) - y[1]*sin(sqrt(abs(y[1] - y[2] - 47)))";
    vec![
        // Rastrigin 1974; Muehlenbein, Schomisch and Born 1991.
        function("rastrigin10", 10, (-5.12, 5.12), rastrigin, 0.0, vec![0.0; 10], 8_750),
        function("rastrigin30", 30, (-5.12, 5.12), rastrigin, 0.0, vec![0.0; 30], 38_500),
        // Schwefel 1981.
        Function {
            fenced: true,
            ..function(
                "schwefel10",
                10,
                (-500.0, 500.0),
                "sum(i in 1..10: 418.9828872724338 - y[i]*sin(sqrt(abs(y[i]))))",
                0.0,
                vec![420.968746; 10],
                1_850,
            )
        },
        // Griewank 1981.
        function("griewank10", 10, (-600.0, 600.0), griewank, 0.0, vec![0.0; 10], 1_475),
        // Shubert 1972.
        function("shubert2", 2, (-10.0, 10.0), shubert, -186.730908831, vec![0.0; 2], 170),
        // Ackley 1987.
        function("ackley30", 30, (-32.768, 32.768), ackley, 0.0, vec![0.0; 30], 17_500),
        // Michalewicz 1992.
        Function {
            fenced: true,
            ..function(
                "michalewicz10",
                10,
                (0.0, std::f64::consts::PI),
                "-sum(i in 1..10: sin(y[i])*sin(i*y[i]^2/pi)^20)",
                -9.66015171564,
                michalewicz,
                32_500,
            )
        },
        // Whitley et al 1996.
        function("eggholder", 2, (-512.0, 512.0), eggholder, -959.640662721, vec![0.0; 2], 2_650),
        // Dixon and Szego 1978, both.
        Function {
            givens: "given a = [[4, 4, 4, 4], [1, 1, 1, 1], [8, 8, 8, 8], [6, 6, 6, 6], [3, 7, 3, 7], [2, 9, 2, 9], \
                     [5, 5, 3, 3], [8, 1, 8, 1], [6, 2, 6, 2], [7, 3.6, 7, 3.6]]\n\
                     given c = [0.1, 0.2, 0.2, 0.4, 0.4, 0.6, 0.3, 0.7, 0.5, 0.5]\n"
                .to_string(),
            ..function(
                "shekel10",
                4,
                (0.0, 10.0),
                "-sum(m in 1..10: 1/(sum(i in 1..4: (y[i] - a[m, i])^2) + c[m]))",
                -10.5364098167,
                vec![4.000746533, 4.000592935, 3.999663398, 3.9995098],
                307,
            )
        },
        Function {
            givens: "given a = [[10, 3, 17, 3.5, 1.7, 8], [0.05, 10, 17, 0.1, 8, 14], [3, 3.5, 1.7, 10, 17, 8], \
                     [17, 8, 0.05, 10, 0.1, 14]]\n\
                     given p = [[0.1312, 0.1696, 0.5569, 0.0124, 0.8283, 0.5886], \
                     [0.2329, 0.4135, 0.8307, 0.3736, 0.1004, 0.9991], [0.2348, 0.1451, 0.3522, 0.2883, 0.3047, 0.665], \
                     [0.4047, 0.8828, 0.8732, 0.5743, 0.1091, 0.0381]]\ngiven c = [1, 1.2, 3, 3.2]\n"
                .to_string(),
            ..function(
                "hartman6",
                6,
                (0.0, 1.0),
                "-sum(m in 1..4: c[m]*exp(-sum(i in 1..6: a[m, i]*(y[i] - p[m, i])^2)))",
                -3.32236801142,
                vec![0.201689512, 0.1500106953, 0.4768739759, 0.2753324306, 0.3116516163, 0.6573005346],
                112,
            )
        },
    ]
}

/// A rotation drawn from a fixed stream: normal deviates, made orthonormal (Gram and Schmidt).
fn rotation(n: usize) -> Vec<Vec<f64>> {
    let mut rng = stream(2026, n as u64, 0, Purpose::Check);
    let mut rows: Vec<Vec<f64>> = Vec::new();
    while rows.len() < n {
        // Sums of twelve uniform numbers are near enough to normal for a direction.
        let mut row: Vec<f64> = (0..n).map(|_| (0..12).map(|_| rng.random::<f64>()).sum::<f64>() - 6.0).collect();
        for earlier in &rows {
            let along: f64 = row.iter().zip(earlier).map(|(a, b)| a * b).sum();
            row.iter_mut().zip(earlier).for_each(|(a, b)| *a -= along * b);
        }
        let length = row.iter().map(|a| a * a).sum::<f64>().sqrt();
        if length > 0.1 {
            row.iter_mut().for_each(|a| *a /= length);
            rows.push(row);
        }
    }
    rows
}
