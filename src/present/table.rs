//! Columns that line up on a terminal, whatever alphabet their cells are written in.

use unicode_width::UnicodeWidthStr;

/// Which side of a column its cells stand on.
#[derive(Clone, Copy, PartialEq, Eq)]
pub(super) enum Side {
    /// Words.
    Left,
    /// Numbers.
    Right,
}

/// A table of text cells under one line of headings.
pub(super) struct Table {
    columns: Vec<(&'static str, Side)>,
    rows: Vec<Vec<String>>,
}

impl Table {
    /// An empty table with its headings.
    pub(super) fn new(columns: &[(&'static str, Side)]) -> Self {
        Table {
            columns: columns.to_vec(),
            rows: Vec::new(),
        }
    }

    /// Add one row, a cell a column.
    pub(super) fn row(&mut self, cells: Vec<String>) {
        debug_assert_eq!(cells.len(), self.columns.len());
        self.rows.push(cells);
    }

    /// The lines of the table, each ended, indented by two spaces and without trailing blanks.
    pub(super) fn lines(&self) -> String {
        let headings: Vec<&str> = self.columns.iter().map(|(heading, _)| *heading).collect();
        let mut text = self.line(&headings);
        for row in &self.rows {
            text += &self.line(&row.iter().map(String::as_str).collect::<Vec<_>>());
        }
        text
    }

    fn line(&self, cells: &[&str]) -> String {
        let mut line = String::new();
        for (index, cell) in cells.iter().enumerate() {
            let gap = " ".repeat(self.width(index).saturating_sub(cell.width()));
            line += "  ";
            match self.columns[index].1 {
                Side::Left => line = line + cell + &gap,
                Side::Right => line = line + &gap + cell,
            }
        }
        line.truncate(line.trim_end().len());
        line + "\n"
    }

    fn width(&self, index: usize) -> usize {
        let cells = self.rows.iter().map(|row| row[index].width());
        cells
            .chain([self.columns[index].0.width()])
            .max()
            .unwrap_or(0)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn columns_line_up_with_wide_and_accented_cells() {
        let mut table = Table::new(&[("node", Side::Left), ("rπ", Side::Right)]);
        table.row(vec!["入力".into(), "1 kΩ".into()]);
        table.row(vec!["é".into(), "10 kΩ".into()]);
        assert_eq!(
            table.lines(),
            "  node     rπ\n  入力   1 kΩ\n  é     10 kΩ\n"
        );
    }

    #[test]
    fn no_line_ends_in_blanks() {
        let mut table = Table::new(&[("a", Side::Left), ("b", Side::Left)]);
        table.row(vec!["long".into(), String::new()]);
        assert!(table.lines().lines().all(|line| line == line.trim_end()));
    }
}
