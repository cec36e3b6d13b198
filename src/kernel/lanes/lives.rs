//! Which registers are read behind a loop: what a turn sets anew in each of them is then more than a passing thing.

use std::collections::HashSet;

use crate::kernel::program::{Program, Register, Step};

/// For each loop, in the order of the text: the registers that may be read behind it before they are set again.
pub fn live_behind_loops(program: &Program) -> Vec<HashSet<Register>> {
    let mut behind = Vec::new();
    go_back(&program.body, &mut HashSet::new(), Some(&mut behind));
    behind.reverse();
    behind
}

/// From what is live behind the steps to what is live before them. The loops come in the reverse order of the text.
fn go_back(steps: &[Step], live: &mut HashSet<Register>, mut behind: Option<&mut Vec<HashSet<Register>>>) {
    for step in steps.iter().rev() {
        match step {
            Step::Do(instruction) => {
                if let Some(to) = instruction.target() {
                    live.remove(&to);
                }
                live.extend(instruction.sources());
            }
            Step::Loop { body, .. } => {
                let mut inside = live.clone();
                // What the next turn reads first is live at the end of a turn.
                let mut carried = HashSet::new();
                go_back(body, &mut carried, None);
                inside.extend(carried);
                go_back(body, &mut inside, behind.as_deref_mut());
                if let Some(behind) = behind.as_deref_mut() {
                    behind.push(live.clone());
                }
                // There may be no turn at all.
                live.extend(inside);
            }
            Step::When { then, otherwise, .. } => {
                let mut other = live.clone();
                go_back(otherwise, &mut other, behind.as_deref_mut());
                go_back(then, live, behind.as_deref_mut());
                live.extend(other);
            }
        }
    }
}
