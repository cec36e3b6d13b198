//! The whole way from a landscape to programs that executors run.

use std::fmt;
use std::sync::Arc;

use crate::landscape::Landscape;

use super::dead::remove_dead;
use super::differentiate::differentiate;
use super::fuse::fuse;
use super::lower::{lower_shown, lower_value};
use super::program::Program;
use super::registers::plan_registers;
use super::simplify::simplify;
use super::tangent::differentiate_along;
use super::verify::{Fault, Verified, verify};

/// The programs of a landscape.
#[derive(Clone, Debug)]
pub struct Kernel {
    /// Value and gradient at a point.
    pub gradient: Arc<Verified>,
    /// Value, gradient, and the derivative of the gradient along a direction.
    pub curvature: Arc<Verified>,
    /// The shown quantities, if the problem shows any.
    pub shown: Option<Arc<Verified>>,
    /// The number of unknowns.
    pub n_unknowns: usize,
}

/// A program that a pass made and the verifier refused: a fault of ours, not of the problem.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct KernelError {
    /// Which program.
    pub program: &'static str,
    /// What is wrong with it.
    pub fault: Fault,
}

impl fmt::Display for KernelError {
    fn fmt(&self, out: &mut fmt::Formatter<'_>) -> fmt::Result {
        write!(out, "the {} program is not sound: {}", self.program, self.fault)
    }
}

impl std::error::Error for KernelError {}

/// Compiles a landscape.
///
/// # Errors
/// [`KernelError`] where a program does not verify.
pub fn compile(landscape: &Landscape) -> Result<Kernel, KernelError> {
    let gradient = differentiate(&lower_value(landscape));
    let curvature = differentiate_along(&gradient);
    let finish = |name: &'static str, program: &Program| {
        verify(finish(program)).map(Arc::new).map_err(|fault| KernelError { program: name, fault })
    };
    Ok(Kernel {
        gradient: finish("gradient", &gradient)?,
        curvature: finish("curvature", &curvature)?,
        shown: lower_shown(landscape).map(|program| finish("shown", &program)).transpose()?,
        n_unknowns: landscape.slots.len(),
    })
}

/// Simplifies, fuses and plans a program.
pub fn finish(program: &Program) -> Program {
    plan_registers(&fuse(&remove_dead(&simplify(program))))
}
