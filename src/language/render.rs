//! Draws diagnostics: the place, the line, the span, the reason, the remedy.

use super::diagnostic::{Diagnostic, Severity, Span};
use super::lexer::is_unseen;

/// A line wider than this is shown in part.
const WIDEST: usize = 100;

/// At most so many diagnostics are drawn. A file with more is not a problem file, or has one slip that repeats.
const MOST: usize = 50;

/// The diagnostics as text, in the order of their places; of very many only some, refusals first.
///
/// A column counts characters, from 1. Carets stand below what they mean even where a terminal draws characters twice
/// as wide or not at all. A tab counts as one blank, and characters that a terminal would obey are drawn as `�`.
pub fn render(name: &str, text: &str, diagnostics: &[Diagnostic]) -> String {
    let mut sorted: Vec<&Diagnostic> = diagnostics.iter().collect();
    sorted.sort_by_key(|diagnostic| diagnostic.severity);
    sorted.truncate(MOST);
    sorted.sort_by_key(|diagnostic| (diagnostic.span.start, diagnostic.span.end));
    let source = Source::of(text);
    let mut out = String::new();
    for diagnostic in &sorted {
        let verdict = match diagnostic.severity {
            Severity::Refusal => "refused",
            Severity::Warning => "warning",
        };
        let place = source.place(diagnostic.span);
        out.push_str(&format!("{verdict}: {}\n", diagnostic.message));
        out.push_str(&format!("  in {name}, line {}, column {}\n", place.line, place.column()));
        out.push_str(&place.draw());
        for note in &diagnostic.notes {
            match note.span {
                Some(span) => {
                    let place = source.place(span);
                    out.push_str(&format!("  {} (line {}, column {})\n", note.text, place.line, place.column()));
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
    if diagnostics.len() > sorted.len() {
        out.push_str(&format!("and {} more in {name}\n\n", diagnostics.len() - sorted.len()));
    }
    out
}

/// A text with the places where its lines start.
struct Source<'a> {
    text: &'a str,
    starts: Vec<usize>,
}

impl<'a> Source<'a> {
    fn of(text: &'a str) -> Self {
        let ends = text.match_indices('\n').map(|(place, _)| place + 1);
        Source { text, starts: std::iter::once(0).chain(ends).collect() }
    }

    fn place(&self, span: Span) -> Place<'a> {
        let floor = |place: u32| {
            let mut place = (place as usize).min(self.text.len());
            while !self.text.is_char_boundary(place) {
                place -= 1;
            }
            place
        };
        let (start, end) = (floor(span.start), floor(span.end));
        let line = self.starts.partition_point(|&first| first <= start);
        let line_start = self.starts[line - 1];
        let line_end = self.starts.get(line).map_or(self.text.len(), |next| next - 1);
        let shown = self.text[line_start..line_end].trim_end_matches('\r');
        let start = start.min(line_start + shown.len());
        let end = end.clamp(start, line_start + shown.len());
        let (before, rest) = shown.split_at(start - line_start);
        let (within, after) = rest.split_at(end - start);
        Place { line, before, within, after }
    }
}

/// A line, divided by a span. What of a span lies in later lines is not shown.
struct Place<'a> {
    line: usize,
    before: &'a str,
    within: &'a str,
    after: &'a str,
}

impl Place<'_> {
    fn column(&self) -> usize {
        self.before.chars().count() + 1
    }

    /// The line, or the stretch of it that holds the beginning of the span, and carets below the span.
    fn draw(&self) -> String {
        let is_long = width(self.before) + width(self.within) + width(self.after) > WIDEST;
        let room_before = if is_long { WIDEST / 3 } else { WIDEST };
        let kept = self.before.char_indices().rev().scan(0, |used, (place, character)| {
            *used += columns(character);
            (*used <= room_before).then_some(place)
        });
        let before = &self.before[kept.last().unwrap_or(self.before.len())..];
        let mut room = WIDEST - width(before);
        let mut fill = |text: &str| -> String {
            let fitting = text.chars().take_while(|&character| {
                let fits = columns(character) <= room;
                room -= if fits { columns(character) } else { room };
                fits
            });
            fitting.collect()
        };
        let within = fill(self.within);
        let after = fill(self.after);
        let left = if before.len() < self.before.len() { "…" } else { "" };
        let is_cut = within.len() + after.len() < self.within.len() + self.after.len();
        let right = if is_cut { "…" } else { "" };
        let blanks = " ".repeat(width(before) + left.chars().count());
        let carets = "^".repeat(width(&within).max(1));
        let line = harmless(&format!("{left}{before}{within}{after}{right}"));
        format!("      {line}\n      {blanks}{carets}\n")
    }
}

fn harmless(text: &str) -> String {
    let shown = |character| match character {
        '\t' => ' ',
        _ if is_unseen(character) => char::REPLACEMENT_CHARACTER,
        _ => character,
    };
    text.chars().map(shown).collect()
}

fn width(text: &str) -> usize {
    text.chars().map(columns).sum()
}

/// The columns that a terminal gives a character. After Unicode's East Asian widths (Annex 11), in whole blocks: a table
/// of every character would be more exact, and long.
fn columns(character: char) -> usize {
    match character {
        '\u{300}'..='\u{36f}' | '\u{20d0}'..='\u{20ff}' | '\u{fe00}'..='\u{fe0f}' => 0,
        '\u{1100}'..='\u{115f}'
        | '\u{2e80}'..='\u{303e}'
        | '\u{3041}'..='\u{a4cf}'
        | '\u{ac00}'..='\u{d7a3}'
        | '\u{f900}'..='\u{faff}'
        | '\u{fe30}'..='\u{fe6f}'
        | '\u{ff00}'..='\u{ff60}'
        | '\u{ffe0}'..='\u{ffe6}'
        | '\u{1f300}'..='\u{1f64f}'
        | '\u{1f900}'..='\u{1f9ff}'
        | '\u{20000}'..='\u{3fffd}' => 2,
        _ => 1,
    }
}

#[cfg(test)]
mod tests {
    use super::super::mistake::Mistake;
    use super::*;

    /// The line and the carets for the first `mark` in a text.
    fn drawn(text: &str, mark: &str) -> Vec<String> {
        let start = text.find(mark).unwrap();
        let diagnostic = Mistake::ChainedComparison.at(Span::new(start..start + mark.len()));
        render("x.land", text, &[diagnostic]).lines().skip(2).take(2).map(|line| line[6..].to_string()).collect()
    }

    #[test]
    fn carets_stand_below_their_span() {
        assert_eq!(drawn("let\ta = bad\r\n", "bad"), ["let a = bad", "        ^^^"]);
        assert_eq!(drawn("# 分子 bad", "bad"), ["# 分子 bad", "       ^^^"]);
        assert_eq!(drawn("e\u{301} = bad", "bad"), ["e\u{301} = bad", "    ^^^"]);
        assert_eq!(drawn("a = 分子", "分子"), ["a = 分子", "    ^^^^"]);
    }

    #[test]
    fn long_lines_are_shown_in_part() {
        let text = format!("{}bad{}", "x".repeat(300), "y".repeat(300));
        let lines = drawn(&text, "bad");
        assert_eq!(lines[0], format!("…{}bad{}…", "x".repeat(33), "y".repeat(64)));
        assert_eq!(lines[1], format!("{}^^^", " ".repeat(34)));
        assert_eq!(drawn(&"z".repeat(500), &"z".repeat(500)), ["z".repeat(100) + "…", "^".repeat(100)]);
        assert_eq!(drawn(&"z".repeat(100), &"z".repeat(100)), ["z".repeat(100), "^".repeat(100)]);
    }

    #[test]
    fn what_a_terminal_would_obey_is_not_sent_to_it() {
        let lines = drawn("\u{1b}[2J\u{202e}bad", "bad");
        assert_eq!(lines, ["\u{fffd}[2J\u{fffd}bad", "     ^^^"]);
    }

    #[test]
    fn refusals_come_before_warnings_where_not_all_are_drawn() {
        let mut diagnostics = vec![Mistake::OpenText.at(Span::default()); 70];
        diagnostics.iter_mut().for_each(|diagnostic| diagnostic.severity = Severity::Warning);
        diagnostics.push(Mistake::MissingElse.at(Span::new(1..2)));
        let text = render("x.land", "ab", &diagnostics);
        assert_eq!(text.matches("warning: ").count(), MOST - 1);
        assert_eq!(text.matches("refused: ").count(), 1);
        assert!(text.ends_with("and 21 more in x.land\n\n"));
    }
}
