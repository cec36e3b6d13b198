//! What a hunt shows while it goes on: a few lines that renew themselves on a terminal, plain lines now and then
//! elsewhere.

use std::io::{self, IsTerminal};
use std::time::{Duration, Instant};

use indicatif::{ProgressBar, ProgressStyle};
use thalweg::search::{Heuristic, RoundReport};

use super::screen::warn;

/// How often the lines on a terminal are renewed at most.
const RENEWED: Duration = Duration::from_millis(120);
/// The first plain line comes after so long, each further one after twice the time of the one before.
const FIRST_PLAIN: Duration = Duration::from_secs(5);

/// The live display of a hunt.
pub(crate) struct Display {
    way: Way,
    began: Instant,
    allowed: Option<Duration>,
    allowed_evaluations: Option<u64>,
    sign: f64,
    lowest: Option<Lowest>,
    /// Evaluations of earlier sessions.
    before: u64,
}

enum Way {
    Silent,
    Plain(Duration),
    Live(ProgressBar, Instant),
}

struct Lowest {
    value: f64,
    evaluation: u64,
    heuristic: &'static str,
}

impl Display {
    /// A display for a hunt with these budgets; `sign` is -1 for a maximum.
    pub(crate) fn new(quiet: bool, allowed: Option<Duration>, allowed_evaluations: Option<u64>, sign: f64) -> Self {
        let way = if quiet {
            Way::Silent
        } else if io::stderr().is_terminal() {
            let bar = ProgressBar::new_spinner();
            if let Ok(style) = ProgressStyle::with_template("{msg}") {
                bar.set_style(style);
            }
            Way::Live(bar, Instant::now())
        } else {
            Way::Plain(FIRST_PLAIN)
        };
        Display { way, began: Instant::now(), allowed, allowed_evaluations, sign, lowest: None, before: 0 }
    }

    /// Shows the state after a round.
    pub(crate) fn show(&mut self, report: &RoundReport<'_>) {
        let elapsed = self.began.elapsed();
        let due = match &self.way {
            Way::Silent => false,
            Way::Plain(next) => elapsed >= *next,
            Way::Live(_, last) => last.elapsed() >= RENEWED,
        };
        if !due {
            return;
        }
        self.note_lowest(report);
        let text = self.lines(report, elapsed);
        match &mut self.way {
            Way::Silent => {}
            Way::Plain(next) => {
                *next = elapsed * 2;
                warn(&text.join("; "));
            }
            Way::Live(bar, last) => {
                *last = Instant::now();
                bar.set_message(text.join("\n"));
                bar.tick();
            }
        }
    }

    /// Shows that a recorded round was taken in; the time counts from the last of them on.
    pub(crate) fn replayed(&mut self, report: &RoundReport<'_>) {
        self.before = report.evaluations;
        self.began = Instant::now();
        if let Way::Live(bar, last) = &mut self.way
            && last.elapsed() >= RENEWED
        {
            *last = Instant::now();
            let evaluations = rounded(report.evaluations as f64);
            bar.set_message(format!("reading the journal: {} rounds, {evaluations} evaluations", report.round + 1));
            bar.tick();
        }
    }

    /// Tells something at once that is not to be overlooked, even where nothing else is shown.
    pub(crate) fn tell(&self, text: &str) {
        match &self.way {
            Way::Live(bar, _) => bar.suspend(|| warn(text)),
            Way::Silent | Way::Plain(_) => warn(text),
        }
    }

    /// Takes the lines away.
    pub(crate) fn finish(&self) {
        if let Way::Live(bar, _) = &self.way {
            bar.finish_and_clear();
        }
    }

    fn note_lowest(&mut self, report: &RoundReport<'_>) {
        let Some(entry) = report.ledger.lowest_entry().and_then(|id| report.ledger.entry(id)) else { return };
        let first = entry.first();
        let heuristic = Heuristic::ALL.get(first.heuristic).map_or("", |heuristic| heuristic.name());
        self.lowest = Some(Lowest { value: self.sign * entry.value(), evaluation: first.evaluation, heuristic });
    }

    fn lines(&self, report: &RoundReport<'_>, elapsed: Duration) -> Vec<String> {
        let time = match self.allowed {
            Some(allowed) => format!("{} of {}", clock(elapsed), clock(allowed)),
            None => clock(elapsed),
        };
        let of = self.allowed_evaluations.map_or_else(String::new, |most| format!(" of {}", rounded(most as f64)));
        let rate = report.evaluations.saturating_sub(self.before) as f64 / elapsed.as_secs_f64().max(1e-3);
        let evaluations = rounded(report.evaluations as f64);
        let mut lines = vec![format!("{time}  {evaluations}{of} evaluations, {} a second", rounded(rate))];
        if let Some(lowest) = &self.lowest {
            let word = if self.sign < 0.0 { "highest" } else { "lowest" };
            let when = rounded(lowest.evaluation as f64);
            lines.push(format!("{word} {:.9} by {} at {when}", lowest.value, lowest.heuristic));
        }
        let (distinct, confirmed) = (report.ledger.len(), report.ledger.n_confirmed());
        lines.push(format!("{distinct} distinct minima, {confirmed} confirmed"));
        let total = report.evaluations.max(1) as f64;
        let mut shares: Vec<String> = Heuristic::ALL
            .iter()
            .map(|heuristic| (heuristic.name(), report.by_heuristic[heuristic.number()]))
            .chain([("confirming", report.confirming)])
            .filter(|(_, spent)| *spent > 0)
            .map(|(name, spent)| format!("{name} {:.0} %", 100.0 * spent as f64 / total))
            .collect();
        if report.troubles.outside > 0 {
            shares.push(format!("outside {:.1} %", 100.0 * report.troubles.outside as f64 / total));
        }
        lines.push(shares.join(", "));
        lines
    }
}

pub(crate) fn clock(time: Duration) -> String {
    let seconds = time.as_secs();
    match seconds / 3600 {
        0 => format!("{:02}:{:02}", seconds / 60, seconds % 60),
        hours => format!("{hours}:{:02}:{:02}", seconds / 60 % 60, seconds % 60),
    }
}

/// Three digits and a unit: `4.18 million`.
pub(crate) fn rounded(number: f64) -> String {
    let (scaled, unit) = match number {
        n if n >= 1e9 => (n / 1e9, " billion"),
        n if n >= 1e6 => (n / 1e6, " million"),
        n if n >= 1e4 => (n / 1e3, " thousand"),
        n => return format!("{n:.0}"),
    };
    let digits = if scaled >= 100.0 {
        0
    } else if scaled >= 10.0 {
        1
    } else {
        2
    };
    format!("{scaled:.digits$}{unit}")
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn numbers_and_times_are_short() {
        assert_eq!(rounded(7.0), "7");
        assert_eq!(rounded(4_180_000.0), "4.18 million");
        assert_eq!(rounded(12_345.0), "12.3 thousand");
        assert_eq!(clock(Duration::from_secs(61)), "01:01");
        assert_eq!(clock(Duration::from_secs(3600 * 8 + 5)), "8:00:05");
    }
}
