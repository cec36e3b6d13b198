//! The main job against published values: energies, places and numbers of minima.
//!
//! Every case is written in the landscape language and goes the whole way: parse, check, compile, hunt, ledger.

use super::support::{Found, hunt, lowest, table};
use thalweg::search::{Mix, Settings};

fn cluster(n: usize, half_width: f64) -> String {
    format!(
        "given n = {n}\n\
         unknown p[n, 3] in [-{half_width}, {half_width}]\n\
         alike shift p, rotate p, mirror p, exchange p\n\
         let s(i, j) = sum(k in 1..3: (p[i,k] - p[j,k])^2)\n\
         minimise sum(i in 1..n, j in i+1..n: 4*(s(i,j)^-6 - s(i,j)^-3))\n"
    )
}

fn evaluations(most: u64) -> Settings {
    Settings { max_evaluations: Some(most), ..Settings::default() }
}

/// Every minimum that a test relies on is polished, and its declared rigid motions are its only zero modes.
fn demand_clean(found: &[Found], zero_modes: usize) {
    for minimum in found {
        assert!(minimum.confirmed, "{minimum:?}");
        assert!(minimum.residual < 1e-10, "{minimum:?}");
        let zeros = minimum.stiffness.iter().filter(|&&stiffness| stiffness == 0.0).count();
        assert_eq!(zeros, zero_modes, "{minimum:?}");
        assert!(minimum.stiffness.iter().all(|&stiffness| stiffness >= 0.0), "{minimum:?}");
    }
}

/// Sources beside the values, in `tests/data/published/lennard_jones.csv`.
#[test]
fn lowest_clusters_of_2_to_13_atoms() {
    for (n, energy) in table("lennard_jones.csv").into_iter().filter(|row| row.0 <= 13) {
        let settings = Settings { target: Some(energy + 1e-6), ..evaluations(2_000_000) };
        let found = hunt(&cluster(n, 2.5), &settings);
        assert!((found[0].value - energy).abs() < 1e-6, "n = {n}: {} for {energy}", found[0].value);
        demand_clean(&found[..1], if n == 2 { 5 } else { 6 });
    }
}

/// Numbers of distinct minima, mirror images counted once: Hoare and McInnes 1976 (6: 2, 7: 4, 8: 8), Tsai and Jordan
/// 1993 (J Phys Chem 97:11227), Doye and Wales 2002 (J Chem Phys 116:3777) for 9: 21 and 10: 64; from memory, recomputed.
#[test]
fn all_minima_of_5_to_10_atoms() {
    for (n, count, budget) in
        [(5, 1, 20_000), (6, 2, 50_000), (7, 4, 100_000), (8, 8, 400_000), (9, 21, 1_000_000), (10, 64, 4_000_000)]
    {
        let settings = Settings { mix: Mix::read("hop").unwrap(), ..evaluations(budget) };
        let found = hunt(&cluster(n, 2.5), &settings);
        assert_eq!(found.len(), count, "n = {n}: {found:#?}");
        demand_clean(&found, 6);
    }
}

/// Sources beside the values, in `tests/data/published/sphere_charges.csv`.
#[test]
fn charges_on_a_sphere() {
    for (n, energy) in table("sphere_charges.csv").into_iter().filter(|row| (4..=12).contains(&row.0) || row.0 == 24) {
        let problem = format!(
            "given n = {n}\n\
             unknown p[n, 3] in [-1.6, 1.6]\n\
             alike rotate p, mirror p, exchange p\n\
             let u[i in 1..n, k in 1..3] = p[i,k]/norm(p[i])\n\
             minimise sum(i in 1..n, j in i+1..n: 1/sqrt(sum(k in 1..3: (u[i,k] - u[j,k])^2))) +\n\
                 sum(i in 1..n: (dot(p[i], p[i]) - 1)^2)\n"
        );
        let settings = Settings { target: Some(energy + 1e-8), ..evaluations(1_000_000) };
        let found = hunt(&problem, &settings);
        assert!((found[0].value - energy).abs() < 1e-8, "n = {n}: {} for {energy}", found[0].value);
        demand_clean(&found[..1], 3);
    }
}

/// Mueller and Brown 1979 (Theor Chim Acta 53:75); parameters as published, places recomputed with 40 digits.
#[test]
fn three_wells_of_mueller_and_brown() {
    let problem = "given A = [-200, -100, -170, 15]\n\
        given a = [-1, -1, -6.5, 0.7]\n\
        given b = [0, 0, 11, 0.6]\n\
        given c = [-10, -10, -6.5, 0.7]\n\
        given X = [1, 0, -0.5, -1]\n\
        given Y = [0, 0.5, 1.5, 1]\n\
        unknown x in [-1.5, 1.2]\n\
        unknown y in [-0.2, 2]\n\
        minimise sum(k in 1..4: A[k]*exp(a[k]*(x - X[k])^2 + b[k]*(x - X[k])*(y - Y[k]) + c[k]*(y - Y[k])^2))\n";
    let published = [
        (-146.699517209954, -0.5582236346330243, 1.441725841804669),
        (-108.1667241168524, 0.6234994049308765, 0.02803775852868567),
        (-80.76781812965903, -0.05001082299820606, 0.4666941048719721),
    ];
    let stiffness = [[410.531134693, 4068.19895503], [543.836189019, 3005.39586453], [221.037472872, 1479.19702201]];
    let found = hunt(problem, &evaluations(20_000));
    let interior: Vec<&Found> = found.iter().filter(|minimum| minimum.active.is_empty()).collect();
    assert_eq!(interior.len(), 3, "{found:#?}");
    for ((minimum, (value, x, y)), stiffness) in interior.iter().zip(published).zip(stiffness) {
        assert!((minimum.value - value).abs() < 1e-6);
        assert!((minimum.at[0] - x).abs() < 1e-6 && (minimum.at[1] - y).abs() < 1e-6);
        assert!(
            minimum.stiffness.iter().zip(stiffness).all(|(got, expected)| (got - expected).abs() < 1e-6 * expected)
        );
    }
}

/// Dixon and Szego 1978: six minima, two of them lowest at -1.031628453.
#[test]
fn six_hump_camel() {
    let problem = "unknown x in [-3, 3]\n\
        unknown y in [-2, 2]\n\
        minimise (4 - 2.1*x^2 + x^4/3)*x^2 + x*y + (-4 + 4*y^2)*y^2\n";
    let found = hunt(problem, &evaluations(20_000));
    assert_eq!(found.len(), 6, "{found:#?}");
    let n_lowest = found.iter().filter(|minimum| (minimum.value - -1.031628453).abs() < 1e-8).count();
    assert_eq!(n_lowest, 2);

    let halved = hunt(&format!("{problem}alike flip (x, y)\n"), &evaluations(20_000));
    assert_eq!(halved.len(), 3, "each pair is one answer under the declared change of sign");
}

/// Himmelblau 1972 (Applied Nonlinear Programming): four minima of value 0.
#[test]
fn himmelblau() {
    let problem = "unknown x in [-6, 6]\nunknown y in [-6, 6]\nminimise (x^2 + y - 11)^2 + (x + y^2 - 7)^2\n";
    let places = [[3.0, 2.0], [-2.805118, 3.131312], [-3.77931, -3.283186], [3.584428, -1.848126]];
    let found = hunt(problem, &evaluations(20_000));
    assert_eq!(found.len(), 4, "{found:#?}");
    for place in places {
        let near = |minimum: &&Found| minimum.at.iter().zip(place).all(|(x, y)| (x - y).abs() < 1e-5);
        assert_eq!(found.iter().filter(near).count(), 1);
    }
}

/// Shubert 1972 (SIAM J Numer Anal 9:379) in two unknowns. Its factors give exactly 722 interior minima, 18 of them
/// lowest at -186.7309 (Levy and Montalvo 1985); with those on the bounds there are 761 (the 760 in print misses a corner).
#[test]
fn shubert_in_two_unknowns() {
    let problem = "unknown x[2] in [-10, 10]\n\
        minimise product(j in 1..2: sum(i in 1..5: i*cos((i + 1)*x[j] + i)))\n";
    let found = hunt(problem, &evaluations(400_000));
    let interior = found.iter().filter(|minimum| minimum.active.is_empty()).count();
    assert_eq!((interior, found.len()), (722, 761));
    assert_eq!(found.iter().filter(|minimum| (minimum.value - -186.7309).abs() < 1e-4).count(), 18);
    assert!((lowest(&found) - -186.730908831).abs() < 1e-8);
}
