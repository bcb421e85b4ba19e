//! Draws a plan into a folder that vanishes and hands back the members.

use std::path::Path;
use std::time::Duration;

use pastproof::archive::wire;
use pastproof::clock::Clock;
use pastproof::engine::Stop;
use pastproof::engine::crew::Settings;
use pastproof::observer::Silent;
use pastproof::plan::Plan;
use pastproof::quantity::Seed;
use pastproof::verb::draw::{Existing, Request, draw};

use crate::members::Members;

/// How a plan is drawn.
#[derive(Clone)]
pub struct Drawing {
    /// For a plan that names no seed.
    pub seed: Option<Seed>,
    pub threads: usize,
    pub first_depth: Option<u8>,
    pub provenance: wire::Provenance,
    pub patch: Option<Vec<u8>>,
}

/// A clock that stands still: no member but the circumstances may notice.
struct Still;

impl Clock for Still {
    fn utc(&self) -> String {
        "2027-01-01T00:00:00Z".into()
    }

    fn elapsed(&self) -> Duration {
        Duration::ZERO
    }

    fn busy(&self) -> Duration {
        Duration::ZERO
    }
}

impl Default for Drawing {
    fn default() -> Self {
        Self {
            seed: None,
            threads: 2,
            first_depth: None,
            provenance: wire::Provenance {
                provenance: wire::PROVENANCE.into(),
                program: wire::Program {
                    name: "pastproof".into(),
                    version: "0".into(),
                    revision: None,
                    cargo_lock: None,
                    rustc: None,
                },
                repository: None,
                repository_unreadable: None,
                commitment: None,
                ledger: None,
            },
            patch: None,
        }
    }
}

impl Drawing {
    /// The members of the archive of `plan`.
    pub fn of(&self, plan: &Plan) -> Members {
        let folder = tempfile::TempDir::new().unwrap();
        let output = folder.path().join("drawn.tar.zst");
        self.draw_into(plan, &output);
        Members::open(&output)
    }

    /// Draws the archive of `plan` into a file.
    pub fn draw_into(&self, plan: &Plan, output: &Path) {
        let request = Request {
            plan,
            seed: plan.seed_rule().seed().or(self.seed).expect("a seed"),
            first_depth: self.first_depth,
            output,
            existing: Existing::Refuse,
            settings: Settings {
                threads: Some(self.threads),
                ..Settings::default()
            },
            provenance: self.provenance.clone(),
            patch: self.patch.as_deref(),
            platform: "elsewhere".into(),
            cpu_features: Vec::new(),
        };
        draw(&request, &Still, &Silent, &Stop::default()).unwrap();
    }
}
