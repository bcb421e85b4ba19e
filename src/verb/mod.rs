//! Deeds that make or describe an archive. One verb never calls another; what two share stands below them.

pub mod draw;
pub mod examine;
pub mod forecast;
pub mod show;
