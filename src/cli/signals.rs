//! Ctrl-C and the request to terminate: the first asks for an orderly end, the second ends at once.
//!
//! A handler only sets a flag; the engines look at it before every sweep and end with
//! `ErrorKind::Stopped`, so that no half-written file is left.

use std::sync::Arc;
use std::sync::atomic::AtomicBool;

use pastproof::error::{Error, Result};
use signal_hook::consts::{SIGINT, SIGTERM};
use signal_hook::flag;

/// Starts to listen. The flag becomes true with the first signal and stays so.
///
/// # Errors
/// [`ErrorKind::Io`] if the system refuses a handler.
pub fn listen() -> Result<Arc<AtomicBool>> {
    let stop = Arc::new(AtomicBool::new(false));
    for signal in [SIGINT, SIGTERM] {
        // in this order: the first signal meets a flag still unset and only sets it, the second ends
        flag::register_conditional_default(signal, Arc::clone(&stop))
            .and_then(|_| flag::register(signal, Arc::clone(&stop)))
            .map_err(|refusal| Error::io("listen for signals", refusal))?;
    }
    Ok(stop)
}

#[cfg(all(test, unix))]
mod tests {
    use super::*;

    use pastproof::engine::Stop;
    use pastproof::error::ErrorKind;
    use std::os::unix::process::ExitStatusExt;
    use std::process::{Command, Stdio};

    use signal_hook::low_level::raise;

    /// Not a test of its own: the child process of the tests below, which raises one signal or two.
    #[test]
    #[ignore = "child of the other tests"]
    fn child() {
        let Some(request) = std::env::var_os("PASTPROOF_TEST_SIGNALS") else {
            return;
        };
        let request = request.into_string().unwrap();
        let (signal, times) = request.split_once(' ').unwrap();
        let stop = Stop::at(listen().unwrap());
        assert!(stop.check().is_ok());
        for _ in 0..times.parse().unwrap() {
            raise(signal.parse().unwrap()).unwrap();
            assert!(matches!(stop.check().unwrap_err().kind(), ErrorKind::Stopped));
        }
    }

    fn child_with(signal: i32, times: u32) -> std::process::ExitStatus {
        Command::new(std::env::current_exe().unwrap())
            .args(["--exact", "cli::signals::tests::child", "--ignored"])
            .env("PASTPROOF_TEST_SIGNALS", format!("{signal} {times}"))
            .stdout(Stdio::null())
            .stderr(Stdio::null())
            .status()
            .unwrap()
    }

    #[test]
    fn the_first_signal_asks_and_the_second_ends() {
        for signal in [SIGINT, SIGTERM] {
            assert_eq!(child_with(signal, 1).code(), Some(0));
            assert_eq!(child_with(signal, 2).signal(), Some(signal));
        }
    }
}
