//! The drawn figure: a grid of characters, each with its class.

/// What a cell shows, for whoever styles it.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Class {
    /// Nothing.
    Blank,
    /// An axis or one of its ticks.
    AxisLine,
    /// Text of a tick or of an axis.
    Label,
    /// The curve with this place in [`Figure::curves`](super::Figure::curves).
    Curve(usize),
    /// A point of the series with this place in [`Figure::series`](super::Figure::series).
    Point(usize),
    /// An error bar.
    ErrorBar,
    /// A suspect of any series.
    Suspect,
}

/// One character of a frame; always one column wide.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Cell {
    /// The character.
    pub symbol: char,
    /// What it shows.
    pub class: Class,
}

const BLANK: Cell = Cell {
    symbol: ' ',
    class: Class::Blank,
};

/// A drawn figure: rows of cells, all of the same length.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Frame {
    columns: usize,
    rows: usize,
    cells: Vec<Cell>,
}

impl Frame {
    /// A frame with nothing in it.
    pub(super) fn blank(columns: usize, rows: usize) -> Self {
        Self {
            columns,
            rows,
            cells: vec![BLANK; columns * rows],
        }
    }

    /// The width in cells.
    pub fn columns(&self) -> usize {
        self.columns
    }

    /// The height in cells.
    pub fn rows(&self) -> usize {
        self.rows
    }

    /// The rows from the top, each [`columns`](Self::columns) cells long.
    pub fn lines(&self) -> impl Iterator<Item = &[Cell]> {
        (0..self.rows).map(|r| &self.cells[r * self.columns..(r + 1) * self.columns])
    }

    /// The cell at a column and a row, counted from the upper left; none outside the frame.
    pub fn cell(&self, column: usize, row: usize) -> Option<Cell> {
        if column >= self.columns {
            return None;
        }
        self.cells.get(row * self.columns + column).copied()
    }

    /// Plain text, one line per row, each ended by a newline and without trailing blanks.
    pub fn text(&self) -> String {
        let mut out = String::new();
        for line in self.lines() {
            let row: String = line.iter().map(|c| c.symbol).collect();
            out.push_str(row.trim_end_matches(' '));
            out.push('\n');
        }
        out
    }

    /// Writes a cell; outside the frame nothing happens.
    pub(super) fn put(&mut self, column: usize, row: usize, symbol: char, class: Class) {
        if column < self.columns
            && let Some(cell) = self.cells.get_mut(row * self.columns + column)
        {
            *cell = Cell { symbol, class };
        }
    }

    /// Writes characters from a column onward, as labels.
    pub(super) fn write(&mut self, column: usize, row: usize, text: &[char]) {
        for (i, c) in text.iter().enumerate() {
            self.put(column + i, row, *c, Class::Label);
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn outside_is_outside() {
        let mut frame = Frame::blank(3, 2);
        frame.put(3, 0, 'a', Class::Label);
        frame.put(0, 2, 'b', Class::Label);
        frame.write(2, 1, &['c', 'd']);
        assert_eq!(frame.text(), "\n  c\n");
        assert_eq!(frame.cell(3, 0), None);
        assert_eq!(frame.cell(2, 1).map(|c| c.symbol), Some('c'));
        assert_eq!(Frame::blank(0, 2).text(), "\n\n");
    }
}
