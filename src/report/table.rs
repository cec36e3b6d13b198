//! Aligned tables of plain text.

/// Which side of its column a cell keeps to.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Align {
    /// Words.
    Left,
    /// Numbers.
    Right,
}

/// A table that is laid out when all of it is known.
#[derive(Clone, Debug)]
pub struct Table {
    heads: Vec<(String, Align)>,
    rows: Vec<Vec<String>>,
}

impl Table {
    /// A table with these columns.
    pub fn new(heads: &[(&str, Align)]) -> Self {
        Table { heads: heads.iter().map(|&(head, align)| (head.to_string(), align)).collect(), rows: Vec::new() }
    }

    /// Adds a row; missing cells stay blank, and those beyond the columns are dropped.
    pub fn add(&mut self, cells: Vec<String>) {
        self.rows.push(cells);
    }

    /// The text; lines longer than `width` characters end in an ellipsis, so that no terminal breaks them.
    pub fn draw(&self, width: usize) -> String {
        let widths: Vec<usize> = (0..self.heads.len())
            .map(|column| {
                let cells = self.rows.iter().filter_map(|row| row.get(column)).map(|cell| cell.chars().count());
                cells.chain([self.heads[column].0.chars().count()]).max().unwrap_or(0)
            })
            .collect();
        let heads: Vec<String> = self.heads.iter().map(|head| head.0.clone()).collect();
        let mut out = String::new();
        for row in std::iter::once(&heads).chain(&self.rows) {
            let mut line = String::new();
            for (column, &cell_width) in widths.iter().enumerate() {
                let cell = row.get(column).map_or("", String::as_str);
                let gap = if column == 0 { "  " } else { "   " };
                match self.heads[column].1 {
                    Align::Left => line.push_str(&format!("{gap}{cell:<cell_width$}")),
                    Align::Right => line.push_str(&format!("{gap}{cell:>cell_width$}")),
                }
            }
            let line = line.trim_end();
            if line.chars().count() > width {
                out.extend(line.chars().take(width.saturating_sub(1)));
                out.push('…');
            } else {
                out.push_str(line);
            }
            out.push('\n');
        }
        out
    }
}

/// A count with its noun: `1 descent`, `2 descents`.
pub(super) fn counted(count: u64, one: &str, many: &str) -> String {
    format!("{} {}", grouped(count), if count == 1 { one } else { many })
}

/// A count in groups of three: `1 234 567`.
pub(super) fn grouped(count: u64) -> String {
    let digits = count.to_string();
    let mut out = String::new();
    for (place, digit) in digits.chars().enumerate() {
        if place > 0 && (digits.len() - place).is_multiple_of(3) {
            out.push(' ');
        }
        out.push(digit);
    }
    out
}

/// Text that comes from the problem, fit for a terminal: control characters are written out.
pub fn plain(text: &str) -> String {
    text.chars().map(|c| if c.is_control() { c.escape_default().to_string() } else { c.to_string() }).collect()
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn columns_stand_under_their_heads_and_long_lines_are_cut() {
        let mut table = Table::new(&[("rank", Align::Right), ("kind", Align::Left), ("by", Align::Left)]);
        table.add(vec!["1".into(), "interior".into(), "hop 12, survey 3".into()]);
        table.add(vec!["10".into(), "bound".into()]);
        let text = table.draw(80);
        assert_eq!(text, "  rank   kind       by\n     1   interior   hop 12, survey 3\n    10   bound\n");
        let narrow = table.draw(20);
        assert!(narrow.lines().all(|line| line.chars().count() <= 20), "{narrow}");
        assert!(narrow.contains('…'));
    }

    #[test]
    fn a_title_cannot_move_the_cursor() {
        assert_eq!(plain("a\u{1b}[2Jb"), "a\\u{1b}[2Jb");
    }
}
