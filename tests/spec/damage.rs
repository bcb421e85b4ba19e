//! Bits turned at random, in the file and in the tar within: never a panic, and never a yes to other members.
//!
//! A forger mends what he changes (`forgeries.rs`); a disk, a network or a chance does not. Fixed seeds.

use std::fs;

use pastproof::archive::reading::Run;
use pastproof::audit::Conclusion;
use pastproof::audit::replay::{Which, replay};
use pastproof::audit::seal::{Anchors, audit};
use pastproof::engine::Stop;
use pastproof::engine::coupling::Proof;
use pastproof::engine::crew::Settings;
use pastproof::error::Class;
use pastproof::observer::Silent;
use pastproof::quantity::{Digest, SampleIndex, Seed};
use pastproof::stream::{Address, Words};

use crate::members::{Members, golden};

const FILE: &str = "gas.tar.zst";

fn words(number: u64) -> Words {
    let digest = Digest::of(b"Larkmoor, turned bits");
    Address {
        seed: Seed(digest),
        key: digest,
        sample: SampleIndex(number),
    }
    .words(0, 0)
}

fn below(words: &mut Words, bound: usize) -> usize {
    usize::try_from(words.next_word() % bound as u64).unwrap()
}

/// Damages one copy, in the file or in the tar within; whether the audit notices.
fn is_noticed(number: u64, whole: &[u8], tar: &[u8], members: &[(String, Vec<u8>)]) -> bool {
    let mut words = words(number);
    let inside = number % 2 == 0;
    let mut bytes = if inside { tar.to_vec() } else { whole.to_vec() };
    for _ in 0..1 + below(&mut words, 4) {
        let place = below(&mut words, bytes.len());
        bytes[place] ^= 1 << below(&mut words, 8);
    }
    if inside {
        bytes = zstd::encode_all(bytes.as_slice(), 1).unwrap();
    }
    let folder = tempfile::TempDir::new().unwrap();
    let path = folder.path().join("damaged.tar.zst");
    fs::write(&path, &bytes).unwrap();
    let at = format!("copy {number}");
    let noticed = match audit(&path, Anchors::default(), &Silent) {
        Ok(report) if report.conclusion == Conclusion::Holds => {
            assert!(Members::open(&path).0 == members, "{at}: a yes to other members");
            false
        }
        Ok(_) => true,
        Err(error) => {
            assert_eq!(error.class(), Class::Archive, "{at}: {error}");
            true
        }
    };
    let replayed = Run::open(&path).and_then(|run| {
        replay(
            &run,
            Which::All,
            Proof::Fast,
            &Settings {
                threads: Some(1),
                ..Settings::default()
            },
            &Silent,
            &Stop::default(),
        )
    });
    if let Err(error) = replayed {
        assert_eq!(error.class(), Class::Archive, "{at}: {error}");
    }
    noticed
}

/// Damages copies `from` .. `to` and looks at what audit and replay make of them.
fn damage(from: u64, to: u64) {
    let whole = fs::read(golden(FILE)).unwrap();
    let tar = zstd::decode_all(whole.as_slice()).unwrap();
    let members = Members::open(&golden(FILE)).0;
    // plain threads: a replay has a pool of its own, and pools within pools take each other's work onto one stack
    let seen: Vec<bool> = std::thread::scope(|scope| {
        let half = |rest: u64| {
            let (whole, tar, members) = (&whole, &tar, &members);
            scope.spawn(move || {
                let numbers = (from..to).filter(|number| number % 4 / 2 == rest);
                numbers
                    .map(|number| is_noticed(number, whole, tar, members))
                    .collect::<Vec<_>>()
            })
        };
        let halves = [half(0), half(1)];
        halves.into_iter().flat_map(|half| half.join().unwrap()).collect()
    });
    let noticed = seen.iter().filter(|noticed| **noticed).count();
    assert!(
        noticed * 10 > seen.len() * 9,
        "{noticed} of {} damaged copies noticed",
        seen.len()
    );
}

#[test]
fn turned_bits_are_noticed() {
    damage(0, 300);
}

#[test]
#[ignore = "long: twenty thousand damaged copies"]
fn turned_bits_are_noticed_at_length() {
    damage(300, 20_300);
}
