//! What a look works on: the newest values of each source, side by side where the bank pairs.

use std::ops::Range;

use crate::model::{SourceIx, Time};
use crate::stats::Blocks;
use crate::window::{Entry, Windows};

use super::usual::Usual;

/// A source with fewer values than this is left out of a look: its own spread is unknown.
const FEWEST_VALUES: usize = 5;

/// The values that count, of the sources that take part.
#[derive(Clone, Debug)]
pub struct Data {
    /// Who takes part, in display order; a place in this list is a column.
    pub sources: Vec<SourceIx>,
    /// The values, each source's usual place taken off.
    pub values: Values,
    /// Those places, a source each.
    pub usual: Vec<Usual>,
}

/// Values, paired or not; all are offsets from the bank's origin.
#[derive(Clone, Debug)]
pub enum Values {
    /// One row per closed cycle or slot, oldest first.
    Paired(Rows),
    /// Each source's own series, oldest first.
    Alone(Vec<Vec<Entry>>),
}

/// A table of values, one column per source; NaN is a missing cell.
#[derive(Clone, Debug, Default)]
pub struct Rows {
    columns: usize,
    places: Vec<(i64, Time)>,
    cells: Vec<f64>,
}

impl Values {
    fn take_off(&mut self, usual: &[Usual]) {
        match self {
            Self::Paired(rows) => {
                let rows = rows.cells.chunks_exact_mut(usual.len().max(1));
                for (cell, known) in rows.flat_map(|row| row.iter_mut().zip(usual)) {
                    *cell -= known.place;
                }
            }
            Self::Alone(series) => {
                for (values, known) in series.iter_mut().zip(usual) {
                    values.iter_mut().for_each(|e| e.offset -= known.place);
                }
            }
        }
    }
}

impl Rows {
    /// An empty table.
    pub fn new(columns: usize) -> Self {
        Self {
            columns,
            ..Self::default()
        }
    }

    /// Adds a row after the others: its cycle or slot, when its first value was taken, and its cells, of
    /// which those that are not given are missing.
    pub fn push(&mut self, place: i64, taken: Time, cells: &[f64]) {
        let end = self.cells.len() + self.columns;
        self.places.push((place, taken));
        self.cells.extend(cells.iter().take(self.columns));
        self.cells.resize(end, f64::NAN);
    }

    /// Number of rows.
    pub fn len(&self) -> usize {
        self.places.len()
    }

    /// Whether there are none.
    pub fn is_empty(&self) -> bool {
        self.places.is_empty()
    }

    /// The cycle or slot of a row.
    pub fn place(&self, row: usize) -> i64 {
        self.places[row].0
    }

    /// When the first value of a row was taken.
    pub fn taken(&self, row: usize) -> Time {
        self.places[row].1
    }

    /// The cells of a row.
    pub fn row(&self, row: usize) -> &[f64] {
        &self.cells[row * self.columns..(row + 1) * self.columns]
    }

    /// The rows from `from` on, for the statistics.
    pub fn blocks(&self, from: usize) -> Blocks {
        let mut blocks = Blocks::new(self.columns);
        for row in from..self.len() {
            blocks.push(self.row(row).iter().map(|v| Some(*v)));
        }
        blocks
    }

    /// The present values of a column from row `from` on.
    pub fn column(&self, column: usize, from: usize) -> Vec<f64> {
        let all = (from..self.len()).map(|r| self.row(r)[column]);
        all.filter(|v| !v.is_nan()).collect()
    }

    fn keep_columns(&self, keep: &[usize]) -> Self {
        let mut rows = Self {
            columns: keep.len(),
            places: Vec::with_capacity(self.len()),
            cells: Vec::with_capacity(self.len() * keep.len()),
        };
        for row in 0..self.len() {
            rows.places.push(self.places[row]);
            rows.cells.extend(keep.iter().map(|&c| self.row(row)[c]));
        }
        rows
    }
}

/// How many values a look asks for.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Need {
    /// The whole span, or there is no look over it.
    WholeSpan,
    /// Whatever is there, up to the span.
    Whatever,
}

impl Data {
    /// The newest `longest` values of the sources in `who`; where the bank pairs, of the cycles in which
    /// at least `least` of them are present.
    pub fn gather(
        windows: &Windows,
        who: &[(SourceIx, Usual)],
        least: usize,
        longest: usize,
    ) -> Self {
        let sources: Vec<SourceIx> = who.iter().map(|w| w.0).collect();
        let mut values = match windows.blocks() {
            Some(blocks) => {
                Values::Paired(rows(windows, &sources, least, longest, blocks.closed_to()))
            }
            None => Values::Alone(
                sources
                    .iter()
                    .map(|&s| newest(windows, s, longest))
                    .collect(),
            ),
        };
        let usual: Vec<Usual> = who.iter().map(|w| w.1).collect();
        values.take_off(&usual);
        Self {
            sources,
            values,
            usual,
        }
    }

    /// The newest `span` values of every source that has enough of them; `None` when fewer than two
    /// sources have, or when the span is not filled and `need` asks for the whole.
    pub fn cut(&self, span: usize, need: Need) -> Option<Self> {
        let least = match need {
            Need::WholeSpan => span.min(FEWEST_VALUES),
            Need::Whatever => 2,
        };
        match &self.values {
            Values::Paired(rows) => {
                if need == Need::WholeSpan && rows.len() < span {
                    return None;
                }
                let from = rows.len().saturating_sub(span);
                self.cut_rows(rows, from..rows.len(), least)
            }
            Values::Alone(series) => self.cut_series(series, span, least, need),
        }
    }

    /// The rows (or values taken) from the place `from` on, with at least two values each.
    pub fn since(&self, from: i64) -> Option<Self> {
        self.between(from, i64::MAX)
    }

    /// The rows (or values taken) before the place `to`, with at least two values each.
    pub fn before(&self, to: i64) -> Option<Self> {
        self.between(i64::MIN, to)
    }

    fn between(&self, from: i64, to: i64) -> Option<Self> {
        match &self.values {
            Values::Paired(rows) => {
                let at = |place: i64| rows.places.partition_point(|p| p.0 < place);
                let end = if to == i64::MAX { rows.len() } else { at(to) };
                self.cut_rows(rows, at(from)..end, 2)
            }
            Values::Alone(series) => {
                let inside = |e: &&Entry| e.place >= from && (e.place < to || to == i64::MAX);
                let cut = |s: &Vec<Entry>| s.iter().filter(inside).copied().collect();
                let cut: Vec<Vec<Entry>> = series.iter().map(cut).collect();
                self.keep_series(&cut, 2)
            }
        }
    }

    /// How many values of the fullest source lie after a place.
    pub fn values_since(&self, place: i64) -> usize {
        match &self.values {
            Values::Paired(rows) => rows.len() - rows.places.partition_point(|p| p.0 <= place),
            Values::Alone(series) => {
                let newer = |s: &Vec<Entry>| s.len() - s.partition_point(|e| e.place <= place);
                series.iter().map(newer).max().unwrap_or(0)
            }
        }
    }

    fn cut_rows(&self, rows: &Rows, range: Range<usize>, least: usize) -> Option<Self> {
        let enough = |&c: &usize| {
            let present = range.clone().filter(|&r| !rows.row(r)[c].is_nan());
            present.take(least).count() == least
        };
        let keep: Vec<usize> = (0..rows.columns).filter(enough).collect();
        if keep.len() < 2 || range.len() < 2 {
            return None;
        }
        let mut cut = rows.keep_columns(&keep);
        cut.cells.truncate(range.end * keep.len());
        cut.places.truncate(range.end);
        cut.cells.drain(..range.start * keep.len());
        cut.places.drain(..range.start);
        Some(self.kept(&keep, Values::Paired(cut)))
    }

    /// The same with these columns' values alone.
    fn kept(&self, keep: &[usize], values: Values) -> Self {
        Self {
            sources: keep.iter().map(|&c| self.sources[c]).collect(),
            usual: keep.iter().map(|&c| self.usual[c]).collect(),
            values,
        }
    }

    fn cut_series(
        &self,
        series: &[Vec<Entry>],
        span: usize,
        least: usize,
        need: Need,
    ) -> Option<Self> {
        // Two sources that fill the span make it worth a look; slower ones join with what they have.
        if need == Need::WholeSpan && series.iter().filter(|s| s.len() >= span).count() < 2 {
            return None;
        }
        let newest = |s: &Vec<Entry>| s[s.len().saturating_sub(span)..].to_vec();
        let cut: Vec<Vec<Entry>> = series.iter().map(newest).collect();
        self.keep_series(&cut, least)
    }

    fn keep_series(&self, series: &[Vec<Entry>], least: usize) -> Option<Self> {
        let keep: Vec<usize> = (0..series.len())
            .filter(|&c| series[c].len() >= least)
            .collect();
        (keep.len() >= 2).then(|| {
            let values = keep.iter().map(|&c| series[c].clone()).collect();
            self.kept(&keep, Values::Alone(values))
        })
    }

    /// The raw values, a column per source.
    pub fn columns(&self) -> Vec<Vec<f64>> {
        match &self.values {
            Values::Paired(rows) => (0..rows.columns).map(|c| rows.column(c, 0)).collect(),
            Values::Alone(series) => {
                let offsets = |s: &Vec<Entry>| s.iter().map(|e| e.offset).collect();
                series.iter().map(offsets).collect()
            }
        }
    }

    /// The oldest place among the values.
    pub fn oldest_place(&self) -> Option<i64> {
        match &self.values {
            Values::Paired(rows) => rows.places.first().map(|p| p.0),
            Values::Alone(series) => series
                .iter()
                .filter_map(|s| s.first())
                .map(|e| e.place)
                .min(),
        }
    }

    /// The column of a source.
    pub fn column_of(&self, source: SourceIx) -> Option<usize> {
        self.sources.iter().position(|s| *s == source)
    }
}

fn newest(windows: &Windows, source: SourceIx, most: usize) -> Vec<Entry> {
    let mut values: Vec<Entry> = windows
        .ring(source)
        .fresh()
        .rev()
        .take(most)
        .copied()
        .collect();
    values.reverse();
    values
}

/// The newest closed rows in which at least `least` of the sources are present.
fn rows(windows: &Windows, who: &[SourceIx], least: usize, most: usize, closed_to: i64) -> Rows {
    let series: Vec<Vec<Entry>> = who
        .iter()
        .map(|&s| {
            let closed = windows
                .ring(s)
                .fresh()
                .rev()
                .skip_while(|e| e.place > closed_to);
            let mut values: Vec<Entry> = closed.take(most).copied().collect();
            values.reverse();
            values
        })
        .collect();
    let mut places: Vec<i64> = series.iter().flatten().map(|e| e.place).collect();
    places.sort();
    let kept = often_enough(&places, least);
    let kept = &kept[kept.len().saturating_sub(most)..];
    let mut rows = Rows {
        columns: who.len(),
        places: kept.iter().map(|p| (*p, Time::from_us(i64::MAX))).collect(),
        cells: vec![f64::NAN; kept.len() * who.len()],
    };
    for (column, values) in series.iter().enumerate() {
        let mut row = 0;
        for e in values {
            while kept.get(row).is_some_and(|p| *p < e.place) {
                row += 1;
            }
            if kept.get(row) == Some(&e.place) {
                rows.cells[row * who.len() + column] = e.offset;
                rows.places[row].1 = rows.places[row].1.min(e.taken);
            }
        }
    }
    rows
}

/// The distinct entries of a sorted list that stand in it at least `least` times.
fn often_enough(sorted: &[i64], least: usize) -> Vec<i64> {
    let runs = sorted.chunk_by(|a, b| a == b);
    runs.filter(|run| run.len() >= least)
        .map(|run| run[0])
        .collect()
}
