//! How far a drawing is: a bar for a person who watches, else a plain line now and then.
//!
//! Apart, because it alone looks at a running clock. It may be told of progress from any thread and
//! at any rate; what it shows is no part of an answer and goes to standard error.

use std::sync::{Mutex, MutexGuard, PoisonError};
use std::time::{Duration, Instant};

use indicatif::{ProgressBar, ProgressState, ProgressStyle};

use super::{Terminal, Tone, visible};

/// The least time between two plain lines.
const INTERVAL: Duration = Duration::from_secs(10);

/// What a task counts.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub enum Unit {
    /// Samples, at a rate that tells how long the rest will take.
    Samples,
    /// Seconds of a time that is set.
    Seconds,
}

/// The progress of one task; the bar goes when it is dropped.
pub struct Progress<'terminal> {
    terminal: &'terminal Terminal,
    shown: Shown,
}

enum Shown {
    Bar(ProgressBar),
    Lines(Mutex<Lines>),
}

impl<'terminal> Progress<'terminal> {
    pub(super) fn new(terminal: &'terminal Terminal, total: u64, unit: Unit, watched: bool) -> Self {
        let shown = if watched {
            Shown::Bar(bar(total, unit))
        } else {
            Shown::Lines(Mutex::new(Lines::new(total, unit, Instant::now())))
        };
        Self { terminal, shown }
    }

    pub(super) fn bar(&self) -> Option<&ProgressBar> {
        match &self.shown {
            Shown::Bar(bar) => Some(bar),
            Shown::Lines(_) => None,
        }
    }

    /// Names the ensemble that is worked on now.
    pub fn ensemble(&self, label: &str) {
        let label = visible(label).replace('\n', " ");
        match &self.shown {
            Shown::Bar(bar) => bar.set_message(label),
            Shown::Lines(lines) => locked(lines).label = label,
        }
    }

    /// Counts so many more.
    pub fn advance(&self, count: u64) {
        match &self.shown {
            Shown::Bar(bar) => bar.inc(count),
            Shown::Lines(lines) => {
                let line = locked(lines).advance(count, Instant::now());
                if let Some(line) = line {
                    self.terminal.note(Tone::Plain, &line);
                }
            }
        }
    }
}

impl Drop for Progress<'_> {
    fn drop(&mut self) {
        self.terminal.progress_ended();
        if let Shown::Bar(bar) = &self.shown {
            bar.finish_and_clear();
        }
    }
}

fn locked(lines: &Mutex<Lines>) -> MutexGuard<'_, Lines> {
    lines.lock().unwrap_or_else(PoisonError::into_inner)
}

fn bar(total: u64, unit: Unit) -> ProgressBar {
    let bar = ProgressBar::new(total);
    bar.set_style(style(unit));
    // time left goes on while one long sample is drawn
    bar.enable_steady_tick(Duration::from_millis(500));
    bar
}

/// # Panics
/// Never: the templates are fixed and tested.
fn style(unit: Unit) -> ProgressStyle {
    let template = match unit {
        Unit::Samples => "{msg:!24} {wide_bar} {pos}/{len} samples, {rate}/s, {eta} left",
        Unit::Seconds => "{msg:!24} {wide_bar} {pos}/{len} seconds",
    };
    ProgressStyle::with_template(template)
        .expect("a well-formed template")
        .with_key("rate", |state: &ProgressState, text: &mut dyn std::fmt::Write| {
            let _ = text.write_str(&rate(state.per_sec()));
        })
        .progress_chars("=> ")
}

/// Plain lines, where a bar would only fill a log.
struct Lines {
    total: u64,
    unit: Unit,
    done: u64,
    label: String,
    started: Instant,
    spoke: Instant,
}

impl Lines {
    fn new(total: u64, unit: Unit, now: Instant) -> Self {
        Self {
            total,
            unit,
            done: 0,
            label: String::new(),
            started: now,
            spoke: now,
        }
    }

    /// The line to write now, if it is time for one.
    fn advance(&mut self, count: u64, now: Instant) -> Option<String> {
        self.done = self.done.saturating_add(count);
        if now.saturating_duration_since(self.spoke) < INTERVAL {
            return None;
        }
        self.spoke = now;
        Some(self.line(now.saturating_duration_since(self.started)))
    }

    fn line(&self, elapsed: Duration) -> String {
        let (total, done) = (self.total, self.done.min(self.total));
        let mut line = match self.unit {
            Unit::Seconds => format!("{done} of {total} seconds"),
            Unit::Samples => {
                let per_second = done as f64 / elapsed.as_secs_f64().max(1e-9);
                let left = Duration::try_from_secs_f64((total - done) as f64 / per_second);
                let left = left.map_or(String::new(), |left| format!(", about {} left", span(left)));
                format!("{done} of {total} samples, {}/s{left}", rate(per_second))
            }
        };
        if !self.label.is_empty() {
            line += &format!(", {}", self.label);
        }
        line
    }
}

/// Three digits where they mean something.
fn rate(per_second: f64) -> String {
    match per_second {
        slow if slow < 1.0 => format!("{slow:.3}"),
        middle if middle < 100.0 => format!("{middle:.1}"),
        fast => format!("{fast:.0}"),
    }
}

fn span(time: Duration) -> String {
    match time.as_secs() {
        seconds @ ..60 => format!("{seconds} s"),
        seconds @ 60..3600 => format!("{} min {:02} s", seconds / 60, seconds % 60),
        seconds => format!("{} h {:02} min", seconds / 3600, seconds / 60 % 60),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    use std::io;
    use std::sync::Arc;

    use indicatif::{ProgressDrawTarget, TermLike};

    fn after(start: Instant, seconds: u64) -> Instant {
        start + Duration::from_secs(seconds)
    }

    #[test]
    fn a_line_at_most_every_ten_seconds() {
        let start = Instant::now();
        let mut lines = Lines::new(10_000, Unit::Samples, start);
        lines.label = "ensemble 3".to_string();
        assert_eq!(lines.advance(100, after(start, 0)), None);
        assert_eq!(lines.advance(100, after(start, 9)), None);
        // 400 in 10 s are 40 a second, and the other 9,600 take 240 s
        assert_eq!(
            lines.advance(200, after(start, 10)).as_deref(),
            Some("400 of 10000 samples, 40.0/s, about 4 min 00 s left, ensemble 3")
        );
        assert_eq!(lines.advance(200, after(start, 19)), None);
        assert!(lines.advance(0, after(start, 20)).is_some());
        // all at once: one line, not one for each interval that passed
        assert!(lines.advance(0, after(start, 100)).is_some());
        assert_eq!(lines.advance(0, after(start, 101)), None);
    }

    #[test]
    fn seconds_of_a_set_time_have_no_rate() {
        let start = Instant::now();
        let mut lines = Lines::new(60, Unit::Seconds, start);
        lines.label = "ensemble 3".to_string();
        let line = lines.advance(12, after(start, 12));
        assert_eq!(line.as_deref(), Some("12 of 60 seconds, ensemble 3"));
        let _ = style(Unit::Seconds);
    }

    #[test]
    fn odd_counts_do_no_harm() {
        let start = Instant::now();
        let mut lines = Lines::new(0, Unit::Samples, start);
        assert_eq!(
            lines.advance(0, after(start, 10)).as_deref(),
            Some("0 of 0 samples, 0.000/s")
        );
        let mut lines = Lines::new(5, Unit::Samples, start);
        assert_eq!(
            lines.advance(0, after(start, 10)).as_deref(),
            Some("0 of 5 samples, 0.000/s")
        );
        assert_eq!(
            lines.advance(u64::MAX, after(start, 20)).as_deref(),
            Some("5 of 5 samples, 0.250/s, about 0 s left")
        );
    }

    #[test]
    fn spans_and_rates() {
        let spans = [0, 59, 60, 3599, 3600, 90_061].map(|seconds| span(Duration::from_secs(seconds)));
        assert_eq!(
            spans,
            ["0 s", "59 s", "1 min 00 s", "59 min 59 s", "1 h 00 min", "25 h 01 min"]
        );
        assert_eq!([0.5, 12.34, 1234.5].map(rate), ["0.500", "12.3", "1234"]);
    }

    /// A terminal of 80 columns that keeps the last line it was given.
    #[derive(Clone, Debug, Default)]
    struct Screen(Arc<Mutex<String>>);

    impl TermLike for Screen {
        fn width(&self) -> u16 {
            80
        }
        fn move_cursor_up(&self, _: usize) -> io::Result<()> {
            Ok(())
        }
        fn move_cursor_down(&self, _: usize) -> io::Result<()> {
            Ok(())
        }
        fn move_cursor_right(&self, _: usize) -> io::Result<()> {
            Ok(())
        }
        fn move_cursor_left(&self, _: usize) -> io::Result<()> {
            Ok(())
        }
        fn write_line(&self, text: &str) -> io::Result<()> {
            self.write_str(text)
        }
        fn write_str(&self, text: &str) -> io::Result<()> {
            self.0.lock().unwrap().push_str(text);
            Ok(())
        }
        fn clear_line(&self) -> io::Result<()> {
            self.0.lock().unwrap().clear();
            Ok(())
        }
        fn flush(&self) -> io::Result<()> {
            Ok(())
        }
    }

    #[test]
    fn the_bar_fits_its_line() {
        let screen = Screen::default();
        let target = ProgressDrawTarget::term_like(Box::new(screen.clone()));
        let bar = ProgressBar::with_draw_target(Some(1_000_000), target).with_style(style(Unit::Samples));
        bar.set_message("an ensemble whose label is much too long for a line");
        bar.set_position(250_000);
        bar.force_draw();
        let shown = screen.0.lock().unwrap().clone();
        assert!(shown.starts_with("an ensemble whose label  ="), "{shown}");
        assert!(
            shown.contains(" 250000/1000000 samples, ") && shown.trim_end().ends_with("left"),
            "{shown}"
        );
        assert!(shown.chars().count() <= 80, "{shown}");
    }
}
