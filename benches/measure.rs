//! Figures that are measured in turn and repeated. Knows nothing of what is measured.

use std::time::{Duration, Instant};

use crate::Result;

/// How long one measurement of a rate goes on, about.
pub const SLICE: Duration = Duration::from_millis(250);

/// How often each is measured; the best counts, for a busy machine only ever slows.
const REPEATS: usize = 3;

/// What takes longer than this is measured once.
const LONG: Duration = Duration::from_secs(5);

/// A rate: work a nanosecond, or whatever grows with speed.
#[derive(Clone, Copy)]
pub struct Figure {
    pub best: f64,
    pub worst: f64,
}

impl Figure {
    /// How far the repeats lie apart, as a part of the best.
    pub fn spread(self) -> f64 {
        1.0 - self.worst / self.best
    }
}

/// Something that gives a rate each time it is asked.
pub type Measure<'a> = Box<dyn FnMut() -> Result<f64> + 'a>;

/// Measures all in turn, three times, so that a slow moment of the machine meets all alike.
pub fn alternate(measures: &mut [Measure]) -> Result<Vec<Figure>> {
    let mut figures = vec![
        Figure {
            best: 0.0,
            worst: f64::INFINITY
        };
        measures.len()
    ];
    let mut longest = vec![Duration::ZERO; measures.len()];
    for _ in 0..REPEATS {
        for ((measure, figure), longest) in measures.iter_mut().zip(&mut figures).zip(&mut longest) {
            if *longest > LONG {
                continue;
            }
            let start = Instant::now();
            let rate = measure()?;
            *longest = start.elapsed().max(*longest);
            figure.best = figure.best.max(rate);
            figure.worst = figure.worst.min(rate);
        }
    }
    Ok(figures)
}
