//! Tables for the terminal: aligned columns, no borders, nothing that a terminal could take for a command.

use super::text::clean;

/// Where a column's text stands.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Align {
    /// Words.
    Left,
    /// Numbers.
    Right,
}

/// Rows of text under headers.
#[derive(Debug, Clone, Default)]
pub struct Table {
    columns: Vec<(String, Align)>,
    rows: Vec<Vec<String>>,
}

/// Columns are separated by this many spaces.
const GAP: usize = 2;

impl Table {
    /// An empty table with these columns. Headers may be empty; if all are, no header line is written.
    pub fn new<H: Into<String>>(columns: impl IntoIterator<Item = (H, Align)>) -> Self {
        Self {
            columns: columns
                .into_iter()
                .map(|(header, align)| (clean(&header.into()), align))
                .collect(),
            rows: Vec::new(),
        }
    }

    /// Adds a row. Missing cells stay empty; cells beyond the last column are left out.
    pub fn row<C: Into<String>>(&mut self, cells: impl IntoIterator<Item = C>) {
        let mut row: Vec<String> = cells
            .into_iter()
            .take(self.columns.len())
            .map(|cell| clean(&cell.into()))
            .collect();
        row.resize(self.columns.len(), String::new());
        self.rows.push(row);
    }

    /// Whether there are no rows.
    pub fn is_empty(&self) -> bool {
        self.rows.is_empty()
    }

    /// The table as text, a line per row, without a line break at the end.
    pub fn text(&self) -> String {
        let length = |text: &String| text.chars().count();
        let widths: Vec<usize> = self
            .columns
            .iter()
            .enumerate()
            .map(|(index, (header, _))| {
                let cells = self.rows.iter().map(|row| length(&row[index]));
                cells.fold(length(header), usize::max)
            })
            .collect();
        let line = |cells: Vec<&String>| {
            let mut line = String::new();
            for ((cell, width), (_, align)) in cells.iter().zip(&widths).zip(&self.columns) {
                let space = " ".repeat(width - length(cell));
                match align {
                    Align::Left => line.extend([cell.as_str(), &space]),
                    Align::Right => line.extend([&space, cell.as_str()]),
                }
                line.push_str(&" ".repeat(GAP));
            }
            line.trim_end().to_owned()
        };
        let mut lines = Vec::new();
        if self.columns.iter().any(|(header, _)| !header.is_empty()) {
            lines.push(line(
                self.columns.iter().map(|(header, _)| header).collect(),
            ));
        }
        lines.extend(self.rows.iter().map(|row| line(row.iter().collect())));
        lines.join("\n")
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    #[test]
    fn columns_line_up() {
        let mut table = Table::new([
            ("check", Align::Left),
            ("margin", Align::Right),
            ("", Align::Left),
        ]);
        table.row(["mask D", "-3.2 dB", "outside"]);
        table.row(["EVM", "12.0 dB"]);
        assert_eq!(
            table.text(),
            "check    margin\nmask D  -3.2 dB  outside\nEVM     12.0 dB"
        );
    }

    #[test]
    fn escape_sequences_do_not_reach_the_terminal() {
        let mut table = Table::new([("", Align::Left)]);
        table.row(["\u{1b}[2Jx\ny"]);
        assert_eq!(table.text(), "\u{fffd}[2Jx y");
    }

    proptest! {
        #[test]
        fn rows_stay_rows(cells in prop::collection::vec(any::<String>(), 0..9)) {
            let mut table = Table::new([("a", Align::Left), ("b", Align::Right)]);
            for pair in cells.chunks(2) {
                table.row(pair.to_vec());
            }
            prop_assert_eq!(table.text().split('\n').count(), 1 + cells.len().div_ceil(2));
        }
    }
}
