//! How far a long task is: told by the library, shown by whoever wants to.
//!
//! The library never prints. A task that takes long tells an [`Observer`] what it works on and how
//! much of it is done; the results do not depend on who listens.

/// Someone who is told how far a task is.
pub trait Observer: Sync {
    /// A part of the task begins: what it is, and how many pieces (samples, members) it has.
    fn begin(&self, part: &str, pieces: u64);
    /// So many more pieces are done.
    fn advance(&self, pieces: u64);
    /// How the part is worked on, for whoever wants to know.
    fn note(&self, _manner: &str) {}
}

/// Listens to nothing.
pub struct Silent;

impl Observer for Silent {
    fn begin(&self, _part: &str, _pieces: u64) {}
    fn advance(&self, _pieces: u64) {}
}
