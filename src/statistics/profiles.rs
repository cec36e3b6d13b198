//! Profiles: how large a share of problems each heuristic solves within a growing cost.

use super::interval::StatisticsError;

/// A profile: a share of problems that rises in steps and stays between them; 0 below the first.
#[derive(Clone, Debug, PartialEq)]
pub struct Profile {
    /// Where it rises, by rising abscissa: the abscissa, and the share of all problems solved up to it.
    pub steps: Vec<(f64, f64)>,
}

impl Profile {
    /// The share of all problems solved up to this abscissa.
    pub fn at(&self, abscissa: f64) -> f64 {
        let passed = self.steps.partition_point(|step| step.0 <= abscissa);
        if passed == 0 { 0.0 } else { self.steps[passed - 1].1 }
    }
}

/// The performance profiles of Dolan and Moré (2002), one a column (heuristic): the abscissa is the ratio of its cost to
/// the least cost of any column on the same row (problem).
///
/// A cost is positive, and infinite where the problem was not solved. At 1 stands the share of problems on which a
/// heuristic is cheapest; the last step is the share that it solves. A problem that none solves counts among all. Profiles
/// of more than two columns tell of each against the best, not of any two against each other (Gould and Scott 2016).
///
/// # Errors
///
/// No rows or columns, rows of different lengths, or a cost that is not positive.
///
/// ```
/// use thalweg::statistics::performance_profiles;
/// let profiles = performance_profiles(&[vec![100.0, 200.0], vec![300.0, f64::INFINITY]])?;
/// assert_eq!(profiles[0].steps, [(1.0, 1.0)]);
/// assert_eq!(profiles[1].steps, [(2.0, 0.5)]);
/// # Ok::<(), thalweg::statistics::StatisticsError>(())
/// ```
pub fn performance_profiles(costs: &[Vec<f64>]) -> Result<Vec<Profile>, StatisticsError> {
    let columns = check(costs)?;
    let ratio = |row: &Vec<f64>, column: usize| {
        let least = row.iter().copied().fold(f64::INFINITY, f64::min);
        if row[column].is_infinite() { f64::INFINITY } else { row[column] / least }
    };
    Ok((0..columns).map(|column| rise(costs.iter().map(|row| ratio(row, column)).collect())).collect())
}

/// The data profiles of Moré and Wild (2009), one a column (heuristic): the abscissa is the cost divided by the number of
/// the problem's unknowns and one, so in gradients by simplex where costs are evaluations.
///
/// A cost is positive, and infinite where the problem was not solved. The profile of one heuristic does not depend
/// on the others.
///
/// # Errors
///
/// As [`performance_profiles`], and where there are not as many numbers of unknowns as rows.
pub fn data_profiles(costs: &[Vec<f64>], unknowns: &[usize]) -> Result<Vec<Profile>, StatisticsError> {
    let columns = check(costs)?;
    if unknowns.len() != costs.len() {
        return Err(StatisticsError::Ragged);
    }
    let scaled = |column: usize| costs.iter().zip(unknowns).map(|(row, &n)| row[column] / (n as f64 + 1.0)).collect();
    Ok((0..columns).map(|column| rise(scaled(column))).collect())
}

/// The number of columns of costs that can be used.
fn check(costs: &[Vec<f64>]) -> Result<usize, StatisticsError> {
    let columns = costs.first().map_or(0, Vec::len);
    if columns == 0 {
        return Err(StatisticsError::Empty);
    }
    if costs.iter().any(|row| row.len() != columns) {
        return Err(StatisticsError::Ragged);
    }
    match costs.iter().flatten().find(|cost| !(**cost > 0.0)) {
        Some(&cost) => Err(StatisticsError::Unusable(cost)),
        None => Ok(columns),
    }
}

/// The steps of the distribution of abscissas; infinite ones are never reached.
fn rise(mut abscissas: Vec<f64>) -> Profile {
    abscissas.sort_by(f64::total_cmp);
    let n = abscissas.len() as f64;
    let mut passed = 0;
    let mut steps = Vec::new();
    for equal in abscissas.chunk_by(|a, b| a == b).filter(|equal| equal[0].is_finite()) {
        passed += equal.len();
        steps.push((equal[0], passed as f64 / n));
    }
    Profile { steps }
}

#[cfg(test)]
mod tests {
    use super::*;

    const NEVER: f64 = f64::INFINITY;

    #[test]
    fn profiles_by_hand() {
        let costs = [vec![10.0, 20.0, 10.0], vec![30.0, 10.0, NEVER], vec![NEVER; 3], vec![8.0, 4.0, 16.0]];
        let profiles = performance_profiles(&costs).unwrap();
        assert_eq!(profiles[0].steps, [(1.0, 0.25), (2.0, 0.5), (3.0, 0.75)]);
        assert_eq!(profiles[1].steps, [(1.0, 0.5), (2.0, 0.75)]);
        assert_eq!(profiles[2].steps, [(1.0, 0.25), (4.0, 0.5)]);
        assert_eq!([0.5, 1.0, 2.5, 1e9].map(|ratio| profiles[0].at(ratio)), [0.0, 0.25, 0.5, 0.75]);
        let profiles = data_profiles(&costs, &[1, 4, 7, 3]).unwrap();
        assert_eq!(profiles[0].steps, [(2.0, 0.25), (5.0, 0.5), (6.0, 0.75)]);
        assert_eq!(profiles[2].steps, [(4.0, 0.25), (5.0, 0.5)]);
    }

    #[test]
    fn nothing_solved_and_refusals() {
        assert!(performance_profiles(&[vec![NEVER, NEVER]]).unwrap()[0].steps.is_empty());
        assert_eq!(performance_profiles(&[]), Err(StatisticsError::Empty));
        assert_eq!(performance_profiles(&[vec![1.0], vec![]]), Err(StatisticsError::Ragged));
        assert_eq!(performance_profiles(&[vec![0.0]]), Err(StatisticsError::Unusable(0.0)));
        assert!(performance_profiles(&[vec![f64::NAN]]).is_err());
        assert_eq!(data_profiles(&[vec![1.0]], &[]), Err(StatisticsError::Ragged));
    }
}
