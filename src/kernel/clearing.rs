//! Which buffers must be at zero before a program runs again.
//!
//! A program may read a row that it has not written: such a row holds 0 (see [`super::verify`](mod@super::verify)). A machine
//! that keeps its memory from run to run therefore has to clear some buffers, but not those whose rows are all written
//! before they are read. Control flow is the same at every point, so rows are touched in the same order in every run: it is
//! enough that what is read was stored earlier in the same run, or is stored in no run.

use crate::landscape::term::{Affine, Index};

use super::program::{BufferId, Instruction, Program, Role, Step};

/// The buffers that could show something of an earlier run: all but the read-only ones and those that
///
/// - are set from end to end, by a step of the outermost block, before anything else is done with them; or
/// - are first only stored to and then only loaded from, by whole steps of the outermost block.
pub fn buffers_to_clear(program: &Program) -> Vec<BufferId> {
    let ids = (0..program.buffers.len() as u32).map(BufferId);
    ids.filter(|id| {
        let buffer = &program.buffers[id.0 as usize];
        !matches!(buffer.role, Role::Unknowns | Role::Direction) && !begins_afresh(program, *id, buffer.length)
    })
    .collect()
}

fn begins_afresh(program: &Program, buffer: BufferId, length: usize) -> bool {
    let mut loading = false;
    for (number, step) in program.body.iter().enumerate() {
        let mut touches = Touches::default();
        touches.look(step, buffer);
        let first = !program.body[..number].iter().any(|earlier| {
            let mut before = Touches::default();
            before.look(earlier, buffer);
            before.any()
        });
        match touches {
            touches if !touches.any() => {}
            Touches { loads: false, adds: false, .. } if first && sets_all(step, buffer, length) => return true,
            Touches { adds: true, .. } | Touches { stores: true, loads: true, .. } => return false,
            Touches { loads: true, .. } => loading = true,
            Touches { .. } if loading => return false,
            Touches { .. } => {}
        }
    }
    true
}

/// What a step does with a buffer.
#[derive(Clone, Copy, Default)]
struct Touches {
    stores: bool,
    loads: bool,
    adds: bool,
}

impl Touches {
    fn any(self) -> bool {
        self.stores || self.loads || self.adds
    }

    fn look(&mut self, step: &Step, buffer: BufferId) {
        match step {
            Step::Do(instruction) => match instruction {
                Instruction::Store { buffer: other, .. } => self.stores |= *other == buffer,
                Instruction::Load { buffer: other, .. } => self.loads |= *other == buffer,
                Instruction::Accumulate { buffer: other, .. } | Instruction::Deduct { buffer: other, .. } => {
                    self.adds |= *other == buffer;
                }
                _ => {}
            },
            Step::Loop { body, .. } => body.iter().for_each(|step| self.look(step, buffer)),
            Step::When { then, otherwise, .. } => {
                then.iter().chain(otherwise).for_each(|step| self.look(step, buffer));
            }
        }
    }
}

/// Whether a step of the outermost block stores to every row of a buffer.
fn sets_all(step: &Step, buffer: BufferId, length: usize) -> bool {
    let stores_at = |step: &Step, place: &Affine| match step {
        Step::Do(Instruction::Store { buffer: other, at: Index::Affine(at), .. }) => *other == buffer && at == place,
        _ => false,
    };
    match step {
        Step::Loop { first, last, body, .. } => {
            first.constant().is_some_and(|first| first <= 0)
                && last.constant().is_some_and(|last| last >= length as i64 - 1)
                && body.iter().any(|step| stores_at(step, &Affine::level(0)))
        }
        _ => length == 1 && stores_at(step, &Affine::constant(0)),
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::kernel::text::read;

    fn cleared(text: &str) -> Vec<u32> {
        let head = "buffer b0 unknowns 3\nbuffer b1 value 1\nbuffer b2 scratch 3\nr0 = load b0 0\n";
        buffers_to_clear(&read(&format!("{head}{text}")).unwrap()).into_iter().map(|id| id.0).collect()
    }

    #[test]
    fn what_is_written_first_needs_no_clearing() {
        let set = "loop i0 0 .. 2\nstore b2 i0 r0\nend\n";
        assert!(cleared("store b1 0 r0").is_empty());
        assert!(cleared(&format!("{set}accumulate b2 1 r0\nr1 = load b2 2\nstore b2 0 r1")).is_empty());
        // Some rows only: enough where they are only loaded afterwards.
        assert!(cleared("store b2 1 r0\nr1 = load b2 1\nr2 = load b2 0").is_empty());
    }

    #[test]
    fn what_may_be_read_first_is_cleared() {
        let set = "loop i0 0 .. 2\nstore b2 i0 r0\nend\n";
        assert_eq!(cleared("accumulate b1 0 r0"), [1]);
        assert_eq!(cleared(&format!("r1 = load b2 1\n{set}")), [2]);
        assert_eq!(cleared("loop i0 0 .. 1\nstore b2 i0 r0\nend\naccumulate b2 2 r0"), [2]);
        assert_eq!(
            cleared("loop i0 0 .. 2\nwhen i0 < 1\nstore b2 i0 r0\notherwise\nend\nend\naccumulate b2 2 r0"),
            [2]
        );
        // The first turn loads what only the second stores.
        assert_eq!(cleared("loop i0 0 .. 1\nr1 = load b2 1\nstore b2 i0 r1\nend"), [2]);
        assert_eq!(cleared(&format!("loop i0 0 .. 1\nr1 = load b2 1\nstore b2 i0 r1\nend\n{set}")), [2]);
    }
}
