//! The pastproof program: arguments to requests, results to screens and exit codes.
//!
//! All that touches a terminal, a clock, a repository or a signal is in `cli`; what is done is in
//! the library.

mod cli;

fn main() -> std::process::ExitCode {
    cli::main()
}
