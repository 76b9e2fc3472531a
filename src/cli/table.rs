//! Aligned columns for people, within 80 columns.

/// A table whose first column is left-aligned and whose others are right-aligned.
#[derive(Debug)]
pub(super) struct Table {
    rows: Vec<Vec<String>>,
}

impl Table {
    /// A table with these headings.
    pub(super) fn new(headings: &[&str]) -> Self {
        Self { rows: vec![headings.iter().map(ToString::to_string).collect()] }
    }

    /// Adds a row.
    pub(super) fn row(&mut self, cells: impl IntoIterator<Item = String>) {
        self.rows.push(cells.into_iter().collect());
    }

    /// The lines, two spaces in, two between columns, without trailing spaces;
    /// none where no row follows the headings.
    pub(super) fn lines(&self) -> String {
        if self.rows.len() < 2 {
            return String::new();
        }
        let columns = self.rows.iter().map(Vec::len).max().unwrap_or(0);
        let width = |column: usize| {
            self.rows.iter().filter_map(|row| row.get(column)).map(|cell| cell.chars().count()).max()
        };
        let widths: Vec<usize> = (0..columns).map(|column| width(column).unwrap_or(0)).collect();
        let mut text = String::new();
        for row in &self.rows {
            let mut line = String::new();
            for (column, cell) in row.iter().enumerate() {
                let padding = " ".repeat(widths[column].saturating_sub(cell.chars().count()));
                let padded =
                    if column == 0 { format!("{cell}{padding}") } else { format!("{padding}{cell}") };
                line.push_str("  ");
                line.push_str(&padded);
            }
            text.push_str(line.trim_end());
            text.push('\n');
        }
        text
    }
}

/// Decibels to so many places, and no minus before a zero.
pub(super) fn decibels(db: f64, places: usize) -> String {
    let text = format!("{db:.places$} dB");
    match text.strip_prefix('-') {
        Some(zero) if !zero.bytes().any(|byte| (b'1'..=b'9').contains(&byte)) => zero.to_owned(),
        _ => text,
    }
}

/// `text` broken at spaces into lines of at most 80 columns; the first begins
/// with `first`, the others are indented as far.
pub(super) fn wrapped(first: &str, text: &str) -> String {
    let indent = " ".repeat(first.chars().count());
    let mut lines = String::from(first);
    let mut column = first.chars().count();
    let mut at_start = true;
    for word in text.split_whitespace() {
        let length = word.chars().count();
        if !at_start && column + 1 + length > 80 {
            lines.push('\n');
            lines.push_str(&indent);
            column = indent.len();
            at_start = true;
        }
        if !at_start {
            lines.push(' ');
            column += 1;
        }
        lines.push_str(word);
        column += length;
        at_start = false;
    }
    lines.push('\n');
    lines
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn numbers_line_up_at_the_right() {
        let mut table = Table::new(&["Order", "Level"]);
        table.row(["1".to_owned(), "−20.3 dBFS".to_owned()]);
        table.row(["13".to_owned(), "−7.1 dBFS".to_owned()]);
        assert_eq!(table.lines(), "  Order       Level\n  1      −20.3 dBFS\n  13      −7.1 dBFS\n");
    }

    #[test]
    fn a_table_without_rows_is_not_printed() {
        assert_eq!(Table::new(&["Part", "Value"]).lines(), "");
    }

    #[test]
    fn a_zero_has_no_sign() {
        assert_eq!(decibels(-0.004, 2), "0.00 dB");
        assert_eq!(decibels(-0.006, 2), "-0.01 dB");
        assert_eq!(decibels(40.04, 1), "40.0 dB");
    }

    #[test]
    fn no_line_is_longer_than_80_columns() {
        let text = wrapped("  Cause  ", &"word ".repeat(60));
        assert!(text.lines().all(|line| line.chars().count() <= 80));
        assert!(text.lines().skip(1).all(|line| line.starts_with("         word")));
    }
}
