//! The circumstances of a run: when and on what kind of machine.
//!
//! Apart from everything that is sealed as a result: no sample depends on these. Neither the name
//! of the machine nor of its user is ever asked for.

use std::num::NonZero;
use std::time::Duration;

use chrono::{DateTime, SecondsFormat, Utc};

/// The kind of machine the program runs on.
#[derive(Clone, PartialEq, Eq, Debug)]
pub struct Machine {
    /// The operating system, such as `linux`.
    pub system: &'static str,
    /// The architecture, such as `x86_64`.
    pub architecture: &'static str,
    /// The processor's features that bear on speed, as detected now, in a fixed order.
    pub features: Vec<&'static str>,
    /// The threads that the machine offers this process; a run may use fewer. None if unknown.
    pub threads: Option<usize>,
}

impl Machine {
    /// This machine.
    pub fn this() -> Self {
        Self {
            system: std::env::consts::OS,
            architecture: std::env::consts::ARCH,
            features: features(),
            threads: std::thread::available_parallelism().ok().map(NonZero::get),
        }
    }
}

/// The present second in UTC as RFC 3339 writes it, such as `2031-03-04T05:06:07Z`.
pub fn now() -> String {
    stamp(Utc::now())
}

/// Time that this thread has had a processor, where the system tells (POSIX, `clock_gettime`).
#[cfg(unix)]
pub fn busy() -> Option<Duration> {
    let time = rustix::time::clock_gettime(rustix::time::ClockId::ThreadCPUTime);
    Duration::try_from(time).ok()
}

#[cfg(not(unix))]
pub fn busy() -> Option<Duration> {
    None
}

fn stamp(time: DateTime<Utc>) -> String {
    time.to_rfc3339_opts(SecondsFormat::Secs, true)
}

#[cfg(any(target_arch = "x86", target_arch = "x86_64", target_arch = "aarch64"))]
macro_rules! detected {
    ($detect:ident: $($feature:tt)*) => {
        [$(($feature, std::arch::$detect!($feature))),*].into_iter().filter(|(_, here)| *here).map(|(name, _)| name).collect()
    };
}

#[cfg(any(target_arch = "x86", target_arch = "x86_64"))]
fn features() -> Vec<&'static str> {
    detected!(is_x86_feature_detected: "sse2" "sse4.2" "popcnt" "bmi2" "avx" "avx2" "avx512f" "avx512bw"
        "avx512dq" "avx512vl" "avx512ifma" "avx512vpopcntdq" "gfni" "aes" "sha")
}

#[cfg(target_arch = "aarch64")]
fn features() -> Vec<&'static str> {
    detected!(is_aarch64_feature_detected: "neon" "sve" "sve2" "aes" "sha2" "sha3")
}

#[cfg(not(any(target_arch = "x86", target_arch = "x86_64", target_arch = "aarch64")))]
fn features() -> Vec<&'static str> {
    Vec::new()
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Expected: `date -u -d @1740898245 +%FT%TZ` (GNU coreutils).
    #[test]
    fn time_stamps_are_utc_to_the_second() {
        let time = DateTime::from_timestamp(1_740_898_245, 987_654_321).unwrap();
        assert_eq!(stamp(time), "2025-03-02T06:50:45Z");
        let now = now();
        assert!(DateTime::parse_from_rfc3339(&now).is_ok() && now.len() == 20, "{now}");
    }

    /// A thread that waits has no processor.
    #[cfg(unix)]
    #[test]
    fn waiting_is_not_being_busy() {
        let begin = busy().unwrap();
        std::thread::sleep(Duration::from_millis(50));
        assert!(busy().unwrap() - begin < Duration::from_millis(25));
        let start = std::time::Instant::now();
        while busy().unwrap() - begin < Duration::from_millis(25) {
            assert!(start.elapsed() < Duration::from_secs(60), "working makes busy");
        }
    }

    /// Expected: the same flags as the kernel shows, where there is a kernel that shows them.
    #[test]
    fn features_are_those_of_this_processor() {
        let machine = Machine::this();
        assert!(machine.threads.is_none_or(|threads| threads > 0));
        let Ok(shown) = std::fs::read_to_string("/proc/cpuinfo") else {
            return;
        };
        let Some(flags) = shown.lines().find(|line| line.starts_with("flags")) else {
            return;
        };
        for (feature, flag) in [
            ("avx2", "avx2"),
            ("avx512f", "avx512f"),
            ("sha", "sha_ni"),
            ("sse4.2", "sse4_2"),
        ] {
            let listed = flags.split_whitespace().any(|word| word == flag);
            assert_eq!(machine.features.contains(&feature), listed, "{feature}");
        }
    }
}
