//! What a Bayesian who knows nothing of the sizes of basins expects after the survey.

use super::frequencies::Frequencies;

/// The expectations of Boender and Rinnooy Kan (1987) from `n` starts and `w` distinct basins.
///
/// Assumes independent starts; a prior that holds every number of basins for equally likely, and given their number
/// every vector of shares (the uniform law on the simplex: so equal sizes are as likely as any, and landscapes with a
/// few huge and many tiny basins are a priori rare; where that is the truth, the number is underestimated). Only `n`
/// and `w` matter, not how often each basin was met. A figure is absent where its sum diverges.
///
/// ```
/// use thalweg::statistics::{Frequencies, Unconverged, posterior};
/// let met = Frequencies::from_counts(&[7, 2, 1], 0, Unconverged::SetAside)?;
/// assert_eq!(posterior(&met).expected_basins, Some(5.4));
/// # Ok::<(), thalweg::statistics::StatisticsError>(())
/// ```
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Posterior {
    /// `w (n-1)/(n-w-2)`; for `n >= w + 3`.
    pub expected_basins: Option<f64>,
    /// The variance of the number of basins, `w (w+1) (n-1) (n-2)/((n-w-2)^2 (n-w-3))`; for `n >= w + 4`.
    pub variance: Option<f64>,
    /// The expected share of the start region that drains to basins met, `(n-w-1)(n+w)/(n(n-1))`; for `n >= w + 2`.
    pub expected_coverage: Option<f64>,
    /// The chance that every basin has been met, the product of `(n-1-i)/(n-1+i)` for i to w; for `n >= w + 2`.
    pub all_met: Option<f64>,
}

/// The posterior figures; all absent without starts.
pub fn posterior(met: &Frequencies) -> Posterior {
    let (n, w) = (met.starts() as f64, met.basins() as f64);
    let spare = n - w;
    let given = |least: f64, value: f64| (w >= 1.0 && spare >= least).then_some(value);
    // The product has at most as many factors as it takes to vanish.
    let mut all_met = 1.0;
    let mut i = 1.0;
    while i <= w && all_met > 0.0 && spare >= 2.0 {
        all_met *= (n - 1.0 - i) / (n - 1.0 + i);
        i += 1.0;
    }
    Posterior {
        expected_basins: given(3.0, w * (n - 1.0) / (spare - 2.0)),
        variance: given(4.0, w * (w + 1.0) * (n - 1.0) * (n - 2.0) / ((spare - 2.0) * (spare - 2.0) * (spare - 3.0))),
        expected_coverage: given(2.0, (spare - 1.0) / n * ((n + w) / (n - 1.0))),
        all_met: given(2.0, all_met),
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::statistics::Unconverged;
    use crate::statistics::tests::{close, reference};

    fn of(n: u64, w: u64) -> Posterior {
        // Any counts do, since only their sum and number matter.
        let met = Frequencies::from_pairs(&[(1, w - 1), (n - w + 1, 1)], 0, Unconverged::SetAside).unwrap();
        assert_eq!((met.starts(), met.basins()), (n, w));
        posterior(&met)
    }

    #[test]
    fn expectations_match_the_reference() {
        let cases = reference("boender_rinnooy_kan.json")["cases"].as_array().unwrap().clone();
        assert_eq!(cases.len(), 10);
        for case in cases {
            let (n, w) = (case["N"].as_u64().unwrap(), case["w"].as_u64().unwrap());
            let posterior = of(n, w);
            let name = format!("{n} starts, {w} basins");
            close(posterior.expected_basins.unwrap(), &case["expected_number_of_minima"], 1e-13, &name);
            close(posterior.variance.unwrap(), &case["variance_of_number"], 1e-12, &name);
            close(posterior.expected_coverage.unwrap(), &case["expected_discovered_volume"], 1e-13, &name);
            close(posterior.all_met.unwrap(), &case["prob_all_found"], 1e-11, &name);
        }
    }

    #[test]
    fn figures_are_absent_where_their_sums_diverge() {
        let known = |n, w| {
            let posterior = of(n, w);
            [
                posterior.all_met.is_some() && posterior.expected_coverage.is_some(),
                posterior.expected_basins.is_some(),
                posterior.variance.is_some(),
            ]
        };
        assert_eq!(known(5, 5), [false; 3]);
        assert_eq!(known(6, 5), [false; 3]);
        assert_eq!(known(7, 5), [true, false, false]);
        assert_eq!(known(8, 5), [true, true, false]);
        assert_eq!(known(9, 5), [true; 3]);
        let nothing = Frequencies::from_counts(&[], 0, Unconverged::SetAside).unwrap();
        assert_eq!(posterior(&nothing).all_met, None);
    }
}
