//! Draws diagnostics: the place, the line, the span, the reason, the remedy.

use super::diagnostic::{Diagnostic, Severity, Span};

/// A line longer than this is shown in part.
const WIDEST: usize = 100;

/// The diagnostics as text, in the order of their places.
///
/// Carets count characters, and a tab as one blank; characters that a terminal draws wide move them, which no count of
/// our own would get right everywhere.
pub fn render(name: &str, text: &str, diagnostics: &[Diagnostic]) -> String {
    let mut sorted: Vec<&Diagnostic> = diagnostics.iter().collect();
    sorted.sort_by_key(|diagnostic| (diagnostic.span.start, diagnostic.span.end));
    let mut out = String::new();
    for diagnostic in sorted {
        let verdict = match diagnostic.severity {
            Severity::Refusal => "refused",
            Severity::Warning => "warning",
        };
        let place = Place::of(text, diagnostic.span);
        out.push_str(&format!("{verdict}: {}\n", diagnostic.message));
        out.push_str(&format!("  in {name}, line {}, column {}\n", place.line, place.column));
        out.push_str(&place.draw());
        for note in &diagnostic.notes {
            match note.span {
                Some(span) => {
                    let place = Place::of(text, span);
                    out.push_str(&format!("  {} (line {}, column {})\n", note.text, place.line, place.column));
                    out.push_str(&place.draw());
                }
                None => out.push_str(&format!("  {}\n", note.text)),
            }
        }
        if let Some(remedy) = &diagnostic.remedy {
            out.push_str(&format!("  {remedy}\n"));
        }
        out.push('\n');
    }
    out
}

struct Place<'a> {
    line: usize,
    column: usize,
    text: &'a str,
    /// Characters of the line before the span, and in it.
    before: usize,
    within: usize,
}

impl<'a> Place<'a> {
    fn of(text: &'a str, span: Span) -> Self {
        let floor = |place: usize| {
            let mut place = place.min(text.len());
            while !text.is_char_boundary(place) {
                place -= 1;
            }
            place
        };
        let (start, end) = (floor(span.start as usize), floor(span.end as usize));
        let line_start = text[..start].rfind('\n').map_or(0, |place| place + 1);
        let line = text[line_start..].split('\n').next().unwrap_or("").trim_end_matches('\r');
        let line_end = line_start + line.len();
        let start = start.min(line_end);
        let within = text[start..end.clamp(start, line_end)].chars().count().max(1);
        let before = text[line_start..start].chars().count();
        Place { line: text[..line_start].matches('\n').count() + 1, column: before + 1, text: line, before, within }
    }

    fn draw(&self) -> String {
        let n_chars = self.text.chars().count();
        let first = if n_chars <= WIDEST { 0 } else { self.before.saturating_sub(WIDEST / 3) };
        let shown: String =
            self.text.chars().skip(first).take(WIDEST).map(|c| if c == '\t' { ' ' } else { c }).collect();
        let (left, right) = (if first > 0 { "…" } else { "" }, if n_chars > first + WIDEST { "…" } else { "" });
        let blanks = " ".repeat(self.before - first + left.chars().count());
        let carets = "^".repeat(self.within.min(WIDEST.saturating_sub(self.before - first)).max(1));
        format!("      {left}{shown}{right}\n      {blanks}{carets}\n")
    }
}
