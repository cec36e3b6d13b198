//! What members earn: shares of a budget by recent reward per evaluation, with a floor for each.
//!
//! Used twice: between heuristics, and inside a heuristic between its ways to propose. It is probability matching
//! (Goldberg 1990; Thierens 2005): greedier rules starve members whose time comes late.

use crate::numbers::functions;

/// How much of its share at the beginning a member keeps in a short hunt whatever it earns.
pub const EARLY_FLOOR: f64 = 0.3;
/// Descents after which a hunt stands half way between its first bets and the hedge.
const LONG: f64 = 1500.0;

/// The accounts of some members.
#[derive(Clone, Debug)]
pub struct Earnings {
    accounts: Vec<Account>,
    /// How far the hunt is from its bets at the beginning to the hedge of a long one, 0 to 1.
    age: f64,
    /// Evaluations after which what was earned counts half.
    memory: f64,
    /// Evaluations that each member is trusted with before its own rate outweighs the common one.
    trust: f64,
}

#[derive(Clone, Copy, Debug)]
struct Account {
    beginning: f64,
    hedge: f64,
    reward: f64,
    spent: f64,
}

impl Earnings {
    /// Accounts of members, each with its share at the beginning (scaled to sum 1) and the share that it never falls below
    /// once a hunt has become long; a short hunt guarantees [`EARLY_FLOOR`] of the share at the beginning instead. The
    /// second shares sum to 1 at most. A member without a share at the beginning never gets one.
    pub fn new(members: &[(f64, f64)]) -> Self {
        let total: f64 = members.iter().map(|member| member.0).sum();
        let account = |&(beginning, hedge): &(f64, f64)| Account {
            beginning: beginning / total,
            hedge: if beginning > 0.0 { hedge } else { 0.0 },
            reward: 0.0,
            spent: 0.0,
        };
        Earnings { accounts: members.iter().map(account).collect(), age: 0.0, memory: 30_000.0, trust: 5_000.0 }
    }

    /// A hunt has made so many descents.
    pub fn grow(&mut self, descents: u64) {
        self.age = descents as f64 / (descents as f64 + LONG);
    }

    /// A member spent evaluations, and earned a reward by them.
    pub fn earn(&mut self, member: usize, evaluations: u64, reward: f64) {
        let spent = evaluations as f64;
        // Older earnings fade with every evaluation of anyone, so that rates of all members are of the same time.
        let fade = self.memory / (self.memory + spent);
        for account in &mut self.accounts {
            account.reward *= fade;
            account.spent *= fade;
        }
        self.accounts[member].reward += reward;
        self.accounts[member].spent += spent;
    }

    /// Sets the memory and the trust, in evaluations, for the time to come.
    pub fn remember(&mut self, memory: f64, trust: f64) {
        (self.memory, self.trust) = (memory.max(1.0), trust.max(1.0));
    }

    /// The shares now; they sum to 1.
    pub fn shares(&self) -> Vec<f64> {
        let (reward, spent) =
            self.accounts.iter().fold((0.0, 0.0), |sum, account| (sum.0 + account.reward, sum.1 + account.spent));
        let common = if spent > 0.0 { reward / spent } else { 0.0 };
        let score = |account: &Account| {
            if account.beginning == 0.0 {
                return 0.0;
            }
            let rate = (account.reward + common * self.trust) / (account.spent + self.trust);
            // By the square of the rate: in proportion alone, who earns twice as much would get but twice the share. The
            // first bets fade with age; what is left is what was earned.
            functions::real_power(account.beginning, 1.0 - self.age) * rate * rate
        };
        let total: f64 = self.accounts.iter().map(score).sum();
        let floor = |account: &Account| (1.0 - self.age) * EARLY_FLOOR * account.beginning + self.age * account.hedge;
        let free = 1.0 - self.accounts.iter().map(floor).sum::<f64>();
        self.accounts
            .iter()
            .map(|account| {
                let earned = if total > 0.0 { score(account) / total } else { account.beginning };
                floor(account) + free * earned
            })
            .collect()
    }

    /// The member at `draw` (from 0 to 1) of the shares laid end to end.
    pub fn choose(&self, draw: f64) -> usize {
        let mut left = draw;
        let shares = self.shares();
        for (member, share) in shares.iter().enumerate() {
            if left < *share {
                return member;
            }
            left -= share;
        }
        shares.iter().rposition(|&share| share > 0.0).unwrap_or(0)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn who_earns_gets_more_and_nobody_starves() {
        let mut earnings = Earnings::new(&[(1.0, 0.1), (1.0, 0.1), (2.0, 0.2)]);
        earnings.remember(10_000.0, 500.0);
        assert_eq!(earnings.shares(), [0.25, 0.25, 0.5]);
        for _ in 0..200 {
            earnings.earn(0, 100, 1.0);
            earnings.earn(1, 100, 0.0);
            earnings.earn(2, 100, 0.1);
        }
        let shares = earnings.shares();
        assert!((shares.iter().sum::<f64>() - 1.0).abs() < 1e-12);
        assert!(shares[0] > 0.55 && shares[1] >= 0.07 && shares[2] >= 0.15, "{shares:?}");
        // A member that earned long ago is forgotten.
        for _ in 0..2000 {
            earnings.earn(0, 100, 0.0);
            earnings.earn(1, 100, 1.0);
            earnings.earn(2, 100, 0.0);
        }
        let shares = earnings.shares();
        assert!(shares[1] > 0.6 && shares[0] >= 0.07, "{shares:?}");
        // A long hunt hedges.
        earnings.grow(1_000_000_000);
        let shares = earnings.shares();
        assert!(shares[0] >= 0.1 && shares[1] > 0.6 && shares[2] >= 0.2, "{shares:?}");
    }

    #[test]
    fn draws_follow_the_shares() {
        let earnings = Earnings::new(&[(0.5, 0.0), (0.0, 0.3), (0.5, 0.0)]);
        assert_eq!([0.0, 0.49, 0.51, 0.999_999, 1.0].map(|draw| earnings.choose(draw)), [0, 0, 2, 2, 2]);
    }
}
