//! Sums of rows picked by number: the inner loop of deals and resamples.

/// Columns summed together; more are cut into panels.
const PANEL: usize = 16;

/// Rows of numbers, stored so that the columns of a panel stay in registers while rows are added.
#[derive(Clone, Debug)]
pub(super) struct Table {
    columns: usize,
    panels: Vec<Panel>,
}

#[derive(Clone, Debug)]
struct Panel {
    /// Columns with padding, an even number: the processor adds two at a time.
    width: usize,
    values: Vec<f64>,
}

impl Table {
    /// The table whose rows `fill` writes, into a slice of `columns` zeros each.
    pub fn new(rows: usize, columns: usize, mut fill: impl FnMut(usize, &mut [f64])) -> Table {
        let mut panels: Vec<Panel> = (0..columns.div_ceil(PANEL))
            .map(|panel| {
                let width = (columns - panel * PANEL).min(PANEL).next_multiple_of(2);
                Panel { width, values: Vec::with_capacity(width * rows) }
            })
            .collect();
        let mut row = vec![0.0; columns.next_multiple_of(PANEL)];
        for number in 0..rows {
            row.fill(0.0);
            fill(number, &mut row[..columns]);
            for (panel, part) in panels.iter_mut().zip(row.chunks(PANEL)) {
                panel.values.extend_from_slice(&part[..panel.width]);
            }
        }
        Table { columns, panels }
    }

    /// Number of columns.
    pub fn columns(&self) -> usize {
        self.columns
    }

    /// One entry.
    pub fn entry(&self, row: usize, column: usize) -> f64 {
        let panel = &self.panels[column / PANEL];
        panel.values[row * panel.width + column % PANEL]
    }

    /// Room for sums: [`columns`](Self::columns) and padding.
    pub fn room(&self) -> Vec<f64> {
        vec![0.0; self.panels.len() * PANEL]
    }

    /// Sums of the rows with these numbers, into the front of `sums`, which [`room`](Self::room) made.
    #[inline]
    pub fn sum(&self, picked: &[u32], sums: &mut [f64]) {
        for (panel, out) in self.panels.iter().zip(sums.chunks_mut(PANEL)) {
            match panel.width {
                2 => add::<2>(&panel.values, picked, out),
                4 => add::<4>(&panel.values, picked, out),
                6 => add::<6>(&panel.values, picked, out),
                8 => add::<8>(&panel.values, picked, out),
                10 => add::<10>(&panel.values, picked, out),
                12 => add::<12>(&panel.values, picked, out),
                14 => add::<14>(&panel.values, picked, out),
                _ => add::<16>(&panel.values, picked, out),
            }
        }
    }

    /// Adds one row to `sums`.
    #[inline]
    pub fn add_row(&self, row: usize, sums: &mut [f64]) {
        for (panel, out) in self.panels.iter().zip(sums.chunks_mut(PANEL)) {
            for (sum, value) in out.iter_mut().zip(&panel.values[row * panel.width..(row + 1) * panel.width]) {
                *sum += value;
            }
        }
    }
}

#[inline]
fn add<const W: usize>(values: &[f64], picked: &[u32], out: &mut [f64]) {
    let (rows, _) = values.as_chunks::<W>();
    let mut sums = [0.0; W];
    for &number in picked {
        let row = &rows[number as usize];
        for (sum, value) in sums.iter_mut().zip(row) {
            *sum += value;
        }
    }
    out[..W].copy_from_slice(&sums);
}
