//! The time, as far as a task may know it: told by the program, never read by the library.
//!
//! No sample depends on it. A run records when it was drawn, and a pilot ends in time.

use std::time::Duration;

/// Someone who knows the time.
pub trait Clock: Sync {
    /// The time now, RFC 3339, UTC.
    fn utc(&self) -> String;
    /// Time since some fixed moment.
    fn elapsed(&self) -> Duration;
    /// Time that the calling thread has had a processor, since some fixed moment: on a machine that others use
    /// too it passes more slowly. Where that is not known, the time.
    fn busy(&self) -> Duration;
}
