//! The bands of one arm as characters: shaded between percentiles, a line for the middle one, the window's limits across.

use std::fmt::Write;
use std::ops::{Range, RangeInclusive};

use neap_engine::run::AtTime;

use crate::numbers::{ordinal, significant, split};
use crate::printer::Look;

/// Rows of the plot itself.
const ROWS: usize = 14;

/// Columns of the plot itself, whatever the terminal's width.
const COLUMNS: RangeInclusive<usize> = 24..=96;

/// Columns left of the plot: the numbers of the upright axis and the axis.
const LEFT: usize = 10;

/// Columns right of the plot: the names of the window's limits.
const RIGHT: usize = 8;

/// Columns that one dosing interval takes at least: with fewer, peaks and troughs run into each other, and the picture shows
/// the beginning and the end of the time instead of all of it.
const INTERVAL: usize = 12;

/// Columns of the gap between the beginning and the end.
const GAP: usize = 3;

/// A limit this many times above the highest band is not drawn, so that the bands stay visible.
const FAR: f64 = 3.0;

/// Steps of the axis of time that people count in, in h.
const HOURS: [f64; 22] = [
    0.01, 0.02, 0.05, 0.1, 0.2, 0.5, 1.0, 2.0, 3.0, 6.0, 12.0, 24.0, 48.0, 72.0, 120.0, 168.0, 336.0, 672.0, 1344.0,
    2688.0, 5376.0, 10752.0,
];

/// The characters of a picture.
struct Ink {
    outer: char,
    inner: char,
    middle: char,
    limit: char,
    upright: char,
    tick: char,
    level: char,
    foot: char,
    corner: char,
    left_out: char,
}

const UNICODE: Ink = Ink {
    outer: '\u{2591}',
    inner: '\u{2592}',
    middle: '\u{2588}',
    limit: '\u{2504}',
    upright: '\u{2502}',
    tick: '\u{2524}',
    level: '\u{2500}',
    foot: '\u{252c}',
    corner: '\u{2514}',
    left_out: '\u{00b7}',
};

const ASCII: Ink = Ink {
    outer: '.',
    inner: ':',
    middle: '#',
    limit: '-',
    upright: '|',
    tick: '+',
    level: '-',
    foot: '+',
    corner: '+',
    left_out: ' ',
};

/// What all pictures of a run share, so that arms can be compared by eye.
pub(crate) struct Frame {
    /// Value at the upper edge.
    top: f64,
    limits: (Option<f64>, Option<f64>),
    unit: String,
    look: Look,
}

/// Which of the percentiles are drawn, as indices into the bands of a time.
struct Drawn {
    outer: Option<(usize, usize)>,
    inner: Option<(usize, usize)>,
    middle: Option<usize>,
}

impl Drawn {
    /// The widest pair, the narrowest other pair, and the middle one of an odd number.
    fn of(percentiles: usize) -> Self {
        let pairs = percentiles / 2;
        Self {
            outer: (pairs >= 1).then(|| (0, percentiles - 1)),
            inner: (pairs >= 2).then(|| (pairs - 1, percentiles - pairs)),
            middle: (percentiles % 2 == 1).then_some(pairs),
        }
    }
}

impl Frame {
    /// The frame that holds these arms and the window.
    pub(crate) fn of<'a>(
        arms: impl IntoIterator<Item = &'a [AtTime]>,
        limits: Option<(Option<f64>, Option<f64>)>,
        unit: &str,
        look: Look,
    ) -> Self {
        let limits = limits.unwrap_or((None, None));
        let highest = arms
            .into_iter()
            .flatten()
            .flat_map(|at| &at.bands)
            .map(|band| band.value)
            .filter(|value| value.is_finite())
            .fold(0.0, f64::max);
        let near = |limit: &f64| highest == 0.0 || *limit <= FAR * highest;
        let top = [limits.0, limits.1].into_iter().flatten().filter(near).fold(highest, f64::max);
        let top = if top > 0.0 { 1.04 * top } else { 1.0 };
        Self { top, limits, unit: unit.to_owned(), look }
    }

    /// The bands of one arm over time, with axes and a legend; `None` where there are not two times to draw between.
    ///
    /// With `interval`, the usual time between doses, a time of many intervals is shown by its beginning and its end.
    pub(crate) fn draw(&self, times: &[AtTime], interval: Option<f64>) -> Option<String> {
        let (first, last) = (times.first()?, times.last()?);
        if last.time_h <= first.time_h {
            return None;
        }
        let ink = if self.look.unicode { &UNICODE } else { &ASCII };
        let columns = (self.look.width.saturating_sub(LEFT + RIGHT)).clamp(*COLUMNS.start(), *COLUMNS.end());
        let drawn = Drawn::of(first.bands.len());
        let stretches = stretches(first.time_h, last.time_h, columns, interval);
        let mut cells = vec![vec![' '; columns]; ROWS];
        for stretch in &stretches {
            self.shade(&mut cells, times, stretch, &drawn, ink);
        }
        let limit_rows = [("high", self.limits.1), ("low", self.limits.0)]
            .map(|(name, limit)| limit.and_then(|limit| Some((name, limit, self.row(limit)?))));
        for (_, _, row) in limit_rows.iter().flatten() {
            for cell in cells[*row].iter_mut().filter(|cell| **cell != ink.middle) {
                *cell = ink.limit;
            }
        }
        if let [left, right] = &stretches[..] {
            for line in &mut cells {
                line[left.columns.end..right.columns.start].fill(' ');
                line[left.columns.end + GAP / 2] = ink.left_out;
            }
        }
        let mut text = format!("{:>width$}\n", self.unit, width = LEFT - 1);
        let ticks = self.ticks();
        for (row, line) in cells.iter().enumerate() {
            let label = ticks.iter().find(|value| self.row(**value) == Some(row));
            let (label, axis) = match label {
                Some(value) => (significant(*value, 3), ink.tick),
                None => (String::new(), ink.upright),
            };
            let name = limit_rows.iter().flatten().find(|(.., at)| *at == row);
            let name = name.map_or_else(String::new, |(name, limit, _)| format!(" {name} {}", significant(*limit, 3)));
            let line: String = line.iter().collect();
            let line = format!("{label:>width$} {axis}{line}{name}", width = LEFT - 2);
            text.push_str(line.trim_end());
            text.push('\n');
        }
        text.push_str(&foot(&stretches, columns, ink));
        if let [left, right] = &stretches[..] {
            let (from, to) = (significant(left.to, 6), significant(right.from, 6));
            let _ = writeln!(text, "{}from {from} to {to} h: left out of the picture, in the tables", " ".repeat(LEFT));
        }
        text.push_str(&self.legend(first, &drawn, ink));
        Some(text)
    }

    /// The row of a value, from the top; `None` above the picture.
    fn row(&self, value: f64) -> Option<usize> {
        let from_bottom = (value / self.top * ROWS as f64) as usize;
        (value >= 0.0 && from_bottom < ROWS).then(|| ROWS - 1 - from_bottom)
    }

    fn shade(&self, cells: &mut [Vec<char>], times: &[AtTime], stretch: &Stretch, drawn: &Drawn, ink: &Ink) {
        let mut before = None;
        for column in stretch.columns.clone() {
            let time = stretch.time(column);
            for (pair, mark) in [(drawn.outer, ink.outer), (drawn.inner, ink.inner)] {
                let Some((low, high)) = pair else { continue };
                let (low, high) = (between(times, time, low), between(times, time, high));
                if high <= 0.0 {
                    continue; // before the first dose: a line on the axis says enough
                }
                let (Some(lowest), Some(highest)) = (self.row(low), self.row(high.min(self.top * 0.999_9))) else {
                    continue;
                };
                for line in &mut cells[highest..=lowest] {
                    line[column] = mark;
                }
            }
            // The middle percentile is one unbroken line: a steep stretch fills the rows it crosses.
            let Some(row) = drawn.middle.and_then(|index| self.row(between(times, time, index))) else { continue };
            let reach = before.map_or(row..=row, |before: usize| match before {
                before if before < row => before + 1..=row,
                before if before > row => row..=before - 1,
                _ => row..=row,
            });
            for line in &mut cells[reach] {
                line[column] = ink.middle;
            }
            before = Some(row);
        }
    }

    /// Round values for the upright axis, from 0, at most five of them.
    fn ticks(&self) -> Vec<f64> {
        let (_, exponent) = split(self.top, 1);
        let ten = (0..exponent.unsigned_abs()).fold(1.0, |ten, _| if exponent < 0 { ten / 10.0 } else { ten * 10.0 });
        let step = [0.1, 0.2, 0.25, 0.5, 1.0, 2.0, 5.0]
            .into_iter()
            .map(|step| step * ten)
            .find(|step| self.top / step < 5.0)
            .unwrap_or(10.0 * ten);
        (0..5).map(|index| f64::from(index) * step).filter(|value| *value <= self.top).collect()
    }

    fn legend(&self, at: &AtTime, drawn: &Drawn, ink: &Ink) -> String {
        let name = |index: usize| ordinal(at.bands[index].percentile);
        let mut parts = Vec::new();
        if let Some((low, high)) = drawn.outer {
            parts.push(format!("{} {} to {} percentile", ink.outer, name(low), name(high)));
        }
        if let Some((low, high)) = drawn.inner {
            parts.push(format!("{} {} to {}", ink.inner, name(low), name(high)));
        }
        if let Some(index) = drawn.middle {
            parts.push(match at.bands[index].percentile {
                50.0 => format!("{} median", ink.middle),
                _ => format!("{} {}", ink.middle, name(index)),
            });
        }
        if self.limits != (None, None) {
            parts.push(format!("{} window", ink.limit));
        }
        let mut text = format!("{}{}\n", " ".repeat(LEFT), parts.join("   "));
        for (name, limit) in [("low", self.limits.0), ("high", self.limits.1)] {
            if let Some(limit) = limit.filter(|limit| self.row(*limit).is_none()) {
                let _ =
                    writeln!(text, "{}the {name} limit, {limit} {}, is above the picture", " ".repeat(LEFT), self.unit);
            }
        }
        text
    }
}

/// A band at a time between two output times, on the straight line that joins them.
fn between(times: &[AtTime], time: f64, index: usize) -> f64 {
    let after = times.partition_point(|at| at.time_h < time).clamp(1, times.len() - 1);
    let (left, right) = (&times[after - 1], &times[after]);
    let part = ((time - left.time_h) / (right.time_h - left.time_h)).clamp(0.0, 1.0);
    left.bands[index].value * (1.0 - part) + right.bands[index].value * part
}

/// A stretch of time and the columns that show it.
struct Stretch {
    from: f64,
    to: f64,
    columns: Range<usize>,
}

impl Stretch {
    /// The time in the middle of a column.
    fn time(&self, column: usize) -> f64 {
        let part = ((column - self.columns.start) as f64 + 0.5) / self.columns.len() as f64;
        self.from + (self.to - self.from) * part
    }

    /// The column of a time of this stretch.
    fn column(&self, time: f64) -> usize {
        let along = (time - self.from) / (self.to - self.from) * self.columns.len() as f64;
        self.columns.start + (along as usize).min(self.columns.len() - 1)
    }
}

/// All of the time, or its beginning and its end where dosing intervals would be too narrow to see.
fn stretches(from: f64, to: f64, columns: usize, interval: Option<f64>) -> Vec<Stretch> {
    let whole = || vec![Stretch { from, to, columns: 0..columns }];
    let Some(interval) = interval else { return whole() };
    if (to - from) / interval * INTERVAL as f64 <= columns as f64 {
        return whole();
    }
    let half = (columns - GAP) / 2;
    let long = (half / INTERVAL).max(1) as f64 * interval;
    if 2.0 * long >= to - from {
        return whole();
    }
    vec![
        Stretch { from, to: from + long, columns: 0..half },
        Stretch { from: to - long, to, columns: columns - half..columns },
    ]
}

/// The axis of time with its numbers.
fn foot(stretches: &[Stretch], columns: usize, ink: &Ink) -> String {
    let mut axis = vec![' '; columns];
    let mut numbers = vec![' '; LEFT + columns + RIGHT];
    let mut free = 0;
    for stretch in stretches {
        let (from, to) = (stretch.from, stretch.to);
        axis[stretch.columns.clone()].fill(ink.level);
        let most = (stretch.columns.len() / 7) as f64;
        let step = HOURS.into_iter().find(|step| (to - from) / step <= most).unwrap_or(to - from);
        for tick in (from / step).ceil() as u64.. {
            let time = tick as f64 * step;
            if time > to * (1.0 + 1e-12) {
                break;
            }
            let column = stretch.column(time);
            let label: Vec<char> = significant(time, 6).chars().collect();
            let start = (LEFT + column).saturating_sub(label.len() / 2);
            axis[column] = ink.foot;
            if start >= free && start + label.len() <= numbers.len() {
                numbers[start..start + label.len()].copy_from_slice(&label);
                free = start + label.len() + 1;
            }
        }
    }
    let numbers: String = numbers.into_iter().collect();
    let axis: String = axis.into_iter().collect();
    let numbers = numbers.trim_end();
    format!("{:>width$}{axis}\n{numbers} h\n", ink.corner, width = LEFT)
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::testing;

    fn frame(times: &[AtTime], limits: (Option<f64>, Option<f64>), unicode: bool) -> Frame {
        Frame::of([times], Some(limits), "mg/L", testing::look(unicode))
    }

    #[test]
    fn a_flat_band_is_where_it_should_be() {
        let times = testing::flat(&[2.0, 4.0, 6.0, 8.0, 10.0], &[0.0, 10.0]);
        let picture = frame(&times, (Some(3.0), None), false).draw(&times, None).unwrap();
        let rows: Vec<&str> = picture.lines().collect();
        // 14 rows reach to 10.4: a row is 0.743 mg/L, so 10 is in the first, 8 in the fourth, 6 in the sixth.
        let of = |row: usize| rows[1 + row].chars().nth(LEFT + 30).unwrap_or(' ');
        let column: String = (0..ROWS).map(of).collect();
        assert_eq!(column.matches('#').count(), 1);
        assert_eq!(of(5), '#', "{picture}");
        assert_eq!((of(0), of(3), of(8), of(11)), ('.', ':', ':', '.'), "{picture}");
        assert_eq!(of(9), '-', "{picture}");
        assert_eq!(of(13), ' ', "{picture}");
        assert!(rows[1 + 9].ends_with(" low 3"), "{picture}");
    }

    #[test]
    fn every_line_fits_the_terminal() {
        let results = testing::results();
        for width in [50, 80, 100] {
            let look = Look { width, ..testing::look(true) };
            let frame =
                Frame::of(results.arms.iter().map(|arm| &arm.times[..]), Some((Some(2.0), Some(8.0))), "mg/L", look);
            let picture = frame.draw(&results.arms[0].times, Some(12.0)).unwrap();
            // The legend is a sentence and may be longer than a narrow picture.
            assert!(picture.lines().take(ROWS + 3).all(|line| line.chars().count() <= width), "{width}\n{picture}");
        }
    }

    #[test]
    fn plain_ascii_where_the_locale_has_no_more() {
        let results = testing::results();
        let picture = frame(&results.arms[0].times, (Some(2.0), Some(8.0)), false)
            .draw(&results.arms[0].times, Some(12.0))
            .unwrap();
        assert!(picture.is_ascii());
    }

    #[test]
    fn a_placebo_and_a_single_time() {
        let nothing = testing::flat(&[0.0, 0.0, 0.0], &[0.0, 24.0]);
        let picture = frame(&nothing, (None, None), false).draw(&nothing, None).unwrap();
        assert!(picture.contains('#'), "{picture}");
        let once = testing::flat(&[1.0, 2.0, 3.0], &[5.0]);
        assert!(frame(&once, (None, None), false).draw(&once, None).is_none());
    }

    #[test]
    fn a_limit_far_above_is_told_not_drawn() {
        let times = testing::flat(&[1.0, 2.0, 3.0], &[0.0, 24.0]);
        let picture = frame(&times, (Some(1.0), Some(80.0)), false).draw(&times, None).unwrap();
        assert!(picture.contains("the high limit, 80 mg/L, is above the picture"), "{picture}");
    }

    #[test]
    fn many_intervals_are_shown_by_their_beginning_and_end() {
        let shown = |to: f64, columns: usize, interval: Option<f64>| {
            stretches(0.0, to, columns, interval).iter().map(|s| (s.from, s.to, s.columns.clone())).collect::<Vec<_>>()
        };
        assert_eq!(shown(168.0, 62, Some(12.0)), [(0.0, 24.0, 0..29), (144.0, 168.0, 33..62)]);
        assert_eq!(shown(168.0, 62, None), [(0.0, 168.0, 0..62)]);
        assert_eq!(shown(48.0, 62, Some(12.0)), [(0.0, 48.0, 0..62)]);
        let results = testing::results();
        let picture = frame(&results.arms[0].times, (Some(2.0), Some(8.0)), true);
        let picture = picture.draw(&results.arms[0].times, Some(12.0)).unwrap();
        assert!(picture.contains("from 24 to 144 h: left out of the picture, in the tables"), "{picture}");
    }

    #[test]
    fn ticks_are_round() {
        let ticks = |top: f64| {
            let times = testing::flat(&[top], &[0.0, 1.0]);
            frame(&times, (None, None), false).ticks()
        };
        assert_eq!(ticks(10.0), [0.0, 2.5, 5.0, 7.5, 10.0]);
        assert_eq!(ticks(0.04), [0.0, 0.01, 0.02, 0.03, 0.04]);
        assert_eq!(ticks(1300.0), [0.0, 500.0, 1000.0]);
    }
}
