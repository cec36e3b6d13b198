//! Random streams keyed by what they are for, never shared.
//!
//! A task of a hunt draws from the stream of its own (seed, round, task). Hence it draws the same numbers whichever
//! thread runs it and whatever ran before: that is half of the promise of determinism (the other half is that results
//! are merged in task order).

use rand::SeedableRng;
use rand_chacha::ChaCha8Rng;

/// What a stream is for; two purposes never share numbers, even for the same seed, round and task.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Purpose {
    /// Proposals of a heuristic.
    Task,
    /// Uniform starts of the survey.
    Survey,
    /// Points at which promises and gradients are tested before a hunt.
    Check,
    /// Choices made when a round is drawn up.
    Round,
}

/// The stream of (seed, round, task) for a purpose.
///
/// ChaCha with 8 rounds (Bernstein 2008): its output is fixed by its definition, on every platform.
///
/// ```
/// use rand::RngExt;
/// use thalweg::base::random::{Purpose, stream};
/// let draw = || stream(1, 2, 3, Purpose::Task).random::<f64>();
/// assert_eq!(draw().to_bits(), draw().to_bits());
/// ```
pub fn stream(seed: u64, round: u64, task: u64, purpose: Purpose) -> ChaCha8Rng {
    let mut key = [0; 32];
    key[..8].copy_from_slice(&seed.to_le_bytes());
    key[8..16].copy_from_slice(&round.to_le_bytes());
    key[16..24].copy_from_slice(&task.to_le_bytes());
    key[24] = purpose as u8;
    ChaCha8Rng::from_seed(key)
}

#[cfg(test)]
mod tests {
    use super::*;
    use rand::RngExt;

    #[test]
    fn every_part_of_the_key_matters() {
        let first = |seed, round, task, purpose| stream(seed, round, task, purpose).random::<u64>();
        let base = first(1, 1, 1, Purpose::Task);
        assert_ne!(base, first(2, 1, 1, Purpose::Task));
        assert_ne!(base, first(1, 2, 1, Purpose::Task));
        assert_ne!(base, first(1, 1, 2, Purpose::Task));
        assert_ne!(base, first(1, 1, 1, Purpose::Survey));
    }
}
