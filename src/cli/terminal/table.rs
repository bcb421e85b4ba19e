//! Tables for the terminal: aligned columns, or one block per row where they would wrap.
//!
//! Apart, because it is pure text and can be tested as such. Nothing is ever shortened. The width
//! is that of the smallest common terminal, not that of the present one, so that the same answer
//! looks the same everywhere.

use std::fmt;

/// The columns of the smallest common terminal (common practice, no source).
pub(super) const WIDTH: usize = 80;

/// The gap between two columns.
const GAP: usize = 2;

/// Where a column's texts stand.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub enum Align {
    /// Texts.
    Left,
    /// Numbers.
    Right,
}

/// Rows under named columns.
#[derive(Clone, Debug)]
pub struct Table {
    columns: Vec<(&'static str, Align)>,
    rows: Vec<Vec<String>>,
}

impl Table {
    /// A table without rows.
    pub fn new(columns: &[(&'static str, Align)]) -> Self {
        Self {
            columns: columns.to_vec(),
            rows: Vec::new(),
        }
    }

    /// Adds a row.
    ///
    /// # Panics
    /// If it has not one cell for each column.
    pub fn row<const N: usize>(&mut self, cells: [String; N]) {
        assert_eq!(N, self.columns.len(), "one cell for each column");
        // a cell is one line and shows what it holds before it is measured
        self.rows
            .push(cells.map(|cell| super::visible(&cell).replace('\n', "\\n")).into());
    }

    fn widths(&self) -> Vec<usize> {
        let cells = |column: usize| self.rows.iter().map(move |row| width(&row[column]));
        let columns = self.columns.iter().enumerate();
        columns
            .map(|(column, (title, _))| cells(column).fold(width(title), usize::max))
            .collect()
    }
}

/// Letters, each taken as one column: East Asian texts stand a little crooked.
fn width(text: &str) -> usize {
    text.chars().count()
}

impl fmt::Display for Table {
    /// Lines without a line break after the last and without spaces at their ends.
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let widths = self.widths();
        let whole = widths.iter().sum::<usize>() + GAP * widths.len().saturating_sub(1);
        let titles = self.columns.iter().map(|(title, _)| *title);
        let lines: Vec<String> = if whole <= WIDTH {
            let mut lines = vec![self.aligned(titles, &widths)];
            lines.extend(
                self.rows
                    .iter()
                    .map(|row| self.aligned(row.iter().map(String::as_str), &widths)),
            );
            lines
        } else {
            let label = titles.clone().map(width).max().unwrap_or(0);
            let block = |row: &Vec<String>| {
                let cells = titles.clone().zip(row);
                let lines = cells.map(|(title, cell)| format!("{title:label$}  {cell}").trim_end().to_string());
                lines.collect::<Vec<_>>().join("\n")
            };
            // an empty line between two blocks
            vec![self.rows.iter().map(block).collect::<Vec<_>>().join("\n\n")]
        };
        f.write_str(&lines.join("\n"))
    }
}

impl Table {
    fn aligned<'a>(&self, cells: impl Iterator<Item = &'a str>, widths: &[usize]) -> String {
        let cells = cells
            .zip(widths)
            .zip(&self.columns)
            .map(|((cell, &width), (_, align))| match align {
                Align::Left => format!("{cell:<width$}"),
                Align::Right => format!("{cell:>width$}"),
            });
        cells.collect::<Vec<_>>().join(&" ".repeat(GAP)).trim_end().to_string()
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn table(name: &str) -> Table {
        let mut table = Table::new(&[
            ("ensemble", Align::Left),
            ("samples", Align::Right),
            ("note", Align::Left),
        ]);
        table.row([name.to_string(), "1000".to_string(), String::new()]);
        table.row(["moor at T = 2.27".to_string(), "5".to_string(), "größer".to_string()]);
        table
    }

    #[test]
    fn columns_are_aligned_without_spaces_at_the_end() {
        assert_eq!(
            table("film").to_string(),
            "ensemble          samples  note\n\
             film                 1000\n\
             moor at T = 2.27        5  größer"
        );
    }

    #[test]
    fn a_table_too_wide_becomes_blocks() {
        // 61 + 2 + 7 + 2 + 6 = 78 columns, so two more fit and three do not
        let fits = table(&"x".repeat(63)).to_string();
        assert!(fits.lines().all(|line| line.chars().count() <= WIDTH) && fits.lines().count() == 3);
        let name = "x".repeat(64);
        assert_eq!(
            table(&name).to_string(),
            format!(
                "ensemble  {name}\nsamples   1000\nnote\n\n\
                 ensemble  moor at T = 2.27\nsamples   5\nnote      größer"
            )
        );
    }

    #[test]
    fn a_cell_stays_one_line() {
        assert!(
            table("two\nlines \u{1b}[2J")
                .to_string()
                .contains("two\\nlines \\u{1b}[2J  ")
        );
        assert_eq!(
            Table::new(&[("a", Align::Left), ("b", Align::Right)]).to_string(),
            "a  b"
        );
    }
}
