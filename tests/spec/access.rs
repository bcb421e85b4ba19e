//! One sample among many is reached by few reads (issue 3, item 7): counted in frames, not in time.

use pastproof::archive::reading::Run;
use pastproof::audit::Conclusion;
use pastproof::audit::replay::{Which, replay};
use pastproof::engine::Stop;
use pastproof::engine::coupling::Proof;
use pastproof::engine::crew::Settings;
use pastproof::observer::Silent;
use pastproof::plan::Plan;
use pastproof::quantity::{EnsembleIndex, SampleIndex};

use crate::drawing::Drawing;

/// How many zstd frames the whole replay of one sample decodes, opening included, in an archive of `samples`
/// samples whose rows and tree take many frames.
fn frames_for_one(samples: u64) -> Vec<u64> {
    let folder = tempfile::TempDir::new().unwrap();
    let file = folder.path().join("many.tar.zst");
    // at infinite temperature one sweep is enough
    let text = format!(
        "title = \"Larkmoor, many\"\nseed = {{ phrase = \"Larkmoor test\" }}\n[[ensemble]]\nlaw = \"ising\"\n\
         lattice = {{ kind = \"hypercubic\", extents = [64] }}\nbeta = 0\nsamples = {samples}\n"
    );
    let plan = Plan::read(text.as_bytes(), &mut |_| unreachable!("no files")).unwrap();
    Drawing::default().draw_into(&plan, &file);
    let ask = |sample: u64| {
        let run = Run::open(&file).unwrap();
        let which = Which::One(EnsembleIndex(0), SampleIndex(sample));
        let report = replay(
            &run,
            which,
            Proof::Full,
            &Settings::default(),
            &Silent,
            &Stop::default(),
        )
        .unwrap();
        assert_eq!(report.conclusion, Conclusion::Holds);
        run.frames_decoded()
    };
    [0, samples / 3, samples / 2 + 77, samples - 1].map(ask).to_vec()
}

/// Eight times as many samples are three more halvings of the table and three more levels of the tree, each of which
/// decodes a frame at most, or two where a read crosses a border. From end to end the larger archive has 35 frames more.
#[test]
fn the_work_for_one_sample_grows_with_the_logarithm_of_their_number() {
    let (few, many) = (frames_for_one(25_000), frames_for_one(200_000));
    for (few, many) in few.iter().zip(&many) {
        assert!(many <= &(few + 9), "{few} frames of 25,000 samples, {many} of 200,000");
    }
    assert!(many.iter().all(|frames| *frames < 25), "{many:?}");
}
