//! The program as a user meets it: verbs, exit codes, JSON, interruptions, terminals, the README.

mod bench;
mod exits;
mod forecast;
mod interrupt;
mod json;
mod memory;
mod readme;
mod verbs;
