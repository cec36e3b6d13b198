//! The only place that writes to the terminal.

use std::io::{self, ErrorKind, Write};

use thalweg::{Blame, Failure};

/// Writes to standard output; a reader who left early, such as `head`, is no failure.
pub(crate) fn say(text: &str) -> Result<(), Failure> {
    let mut out = io::stdout().lock();
    match out.write_all(text.as_bytes()).and_then(|()| out.flush()) {
        Err(error) if error.kind() != ErrorKind::BrokenPipe => {
            Err(Failure::new(Blame::Outside, format!("the output could not be written ({error})")))
        }
        _ => Ok(()),
    }
}

/// Writes a line to standard error; if that fails there is nowhere left to say so.
pub(crate) fn warn(text: &str) {
    let _ = writeln!(io::stderr().lock(), "{text}");
}

/// The width that tables are fitted to: the terminal's, or none when the output goes elsewhere.
pub(crate) fn width() -> usize {
    let (terminal, variable) = (io::IsTerminal::is_terminal(&io::stdout()), std::env::var("COLUMNS"));
    if !terminal {
        return usize::MAX;
    }
    variable.ok().and_then(|columns| columns.parse().ok()).filter(|&columns: &usize| columns >= 40).unwrap_or(120)
}
