//! The commands, and what becomes of their ends.

use std::panic;
use std::process::ExitCode;

use clap::{Parser, Subcommand};
use thalweg::{Blame, Failure};

use super::screen::{say, warn};
use super::{check, hunt, look, minima, resume};

/// Hunts the lowest point of a rugged landscape, and keeps every distinct minimum that it meets.
#[derive(Parser)]
#[command(
    name = "thalweg",
    version,
    disable_help_subcommand = true,
    after_help = "Usual calls:\n  thalweg check pore.land               is the problem sound, and what does it cost?\n  thalweg hunt pore.land --for 8h       search overnight on all cores\n  thalweg resume results/pore           go on with a hunt that was interrupted\n  thalweg minima results/pore           the distinct minima of a run"
)]
struct Typed {
    #[command(subcommand)]
    command: Command,
}

#[derive(Subcommand)]
enum Command {
    /// Reads a problem, tests its promises and gradients, shows its size and cost
    Check(check::Check),
    /// Searches until its budget is spent, and leaves a run folder
    Hunt(hunt::Hunt),
    /// Goes on with a hunt that was interrupted, or with a larger budget
    Resume(resume::Resume),
    /// Shows where a hunt stands, from another terminal
    Look(look::Look),
    /// Shows the distinct minima of a run
    Minima(minima::Minima),
}

/// What a command leaves.
pub(crate) struct End {
    /// For standard output.
    pub(crate) text: String,
    /// The exit status: 0, or 1 where the work has something to report as failed, or 2 for a refused problem.
    pub(crate) status: u8,
}

/// Runs the program: 0 done, 1 something failed, 2 refused, 3 an outside failure, 70 a fault of the program.
pub(crate) fn main() -> ExitCode {
    panic::set_hook(Box::new(|fault| {
        warn(&format!(
            "thalweg: this is a fault of the program, not of your problem: {fault}\n\
             Please report it, with the problem file and the command."
        ));
    }));
    // The hook has told everything; what remains is the exit status.
    panic::catch_unwind(run).unwrap_or(ExitCode::from(70))
}

fn run() -> ExitCode {
    let typed = match Typed::try_parse() {
        Ok(typed) => typed,
        // Help and version come this way too, and are no failures.
        Err(error) => {
            let _ = error.print();
            return ExitCode::from(if error.use_stderr() { 2 } else { 0 });
        }
    };
    let end = match typed.command {
        Command::Check(check) => check.run(),
        Command::Hunt(hunt) => hunt.run(),
        Command::Resume(resume) => resume.run(),
        Command::Look(look) => look.run(),
        Command::Minima(minima) => minima.run(),
    };
    match end.and_then(|end| say(&end.text).map(|()| end.status)) {
        Ok(status) => ExitCode::from(status),
        Err(failure) => {
            warn(&failure.to_string());
            ExitCode::from(status(&failure))
        }
    }
}

fn status(failure: &Failure) -> u8 {
    match failure.blame() {
        Blame::Input => 2,
        Blame::Outside => 3,
        Blame::Program => 70,
    }
}
