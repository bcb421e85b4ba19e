//! The container as a whole: round trips, system tools, hostile files.

use std::io::{Cursor, Write};
use std::process::Command;

use proptest::prelude::*;

use super::frames::{Compressor, FrameStart};
use super::index::{self, Directory};
use super::member::{header, padding};
use super::*;
use crate::error::{Error, ErrorKind, Result};
use crate::quantity::Digest;

type Content = Vec<(String, Vec<u8>)>;

const MIB: usize = 1 << 20;

/// Bytes that do not compress.
fn noise(length: usize, seed: u32) -> Vec<u8> {
    let mut state = seed | 1;
    let mut next = || {
        // xorshift32 (Marsaglia, 2003)
        state ^= state << 13;
        state ^= state >> 17;
        state ^= state << 5;
        (state >> 24) as u8
    };
    (0..length).map(|_| next()).collect()
}

fn seal(members: &[(String, Vec<u8>)]) -> Vec<u8> {
    let mut writer = Writer::new(Vec::new()).unwrap();
    for (name, content) in members {
        assert_eq!(writer.add(name, content).unwrap(), Digest::of(content));
    }
    writer.finish().unwrap()
}

fn small() -> Content {
    vec![
        ("record.json".into(), b"{\"archive\":1}".to_vec()),
        (
            "ensembles/0000/samples.csv".into(),
            b"index,status\n0,exact\n".repeat(40),
        ),
        ("ensembles/0000/empty.bin".into(), Vec::new()),
        ("ensembles/0000/block.bin".into(), noise(512, 3)),
    ]
}

fn large() -> Content {
    vec![
        ("first.txt".into(), b"first".to_vec()),
        ("big.bin".into(), noise(5 * MIB + 77, 5)),
        ("whole.bin".into(), vec![9; 2 * MIB]),
        ("last.txt".into(), b"last".to_vec()),
    ]
}

fn archive(bytes: &[u8]) -> Archive<Cursor<&[u8]>> {
    Archive::new(Cursor::new(bytes), Limits::default()).unwrap()
}

fn walk(archive: &mut Archive<Cursor<&[u8]>>) -> Result<Content> {
    let mut met = Vec::new();
    archive.walk(|member, content| {
        let mut bytes = Vec::new();
        content
            .read_to_end(&mut bytes)
            .map_err(|source| Error::io("read", source))?;
        assert_eq!(bytes.len() as u64, member.size);
        met.push((member.name.clone(), bytes));
        Ok(())
    })?;
    Ok(met)
}

/// A tar by hand: blocks as given, no end.
fn tar_of(members: &[(String, Vec<u8>)]) -> Vec<u8> {
    let mut tar = Vec::new();
    for (name, content) in members {
        tar.extend(header(name, content.len() as u64));
        tar.extend(content);
        tar.resize(tar.len() + padding(content.len() as u64), 0);
    }
    tar
}

fn ended(mut tar: Vec<u8>) -> Vec<u8> {
    tar.resize(tar.len() + 1024, 0);
    tar
}

fn one_frame(tar: &[u8]) -> Vec<u8> {
    Compressor::new().unwrap().compress(tar).unwrap()
}

fn refused(bytes: &[u8]) -> Error {
    let mut file = archive(bytes);
    let error = file.walk(|_, _| Ok(())).expect_err("must be refused");
    // by offset no more must be had than the walk gives
    assert!(file.read("nobody", 1).is_err());
    error
}

fn directory_of(bytes: &[u8]) -> (usize, Directory) {
    let tail = bytes.last_chunk().unwrap();
    let length = index::frame_length(tail, bytes.len() as u64, &Limits::default()).unwrap();
    let at = bytes.len() - length;
    (at, index::decode(&bytes[at..], at as u64, &Limits::default()).unwrap())
}

#[test]
fn what_is_written_is_read() {
    for members in [small(), large()] {
        let bytes = seal(&members);
        let mut file = archive(&bytes);
        assert_eq!(file.index_state(), None);
        assert_eq!(file.members().unwrap().len(), members.len());
        for (name, content) in &members {
            assert!(file.read(name, content.len() as u64).unwrap() == *content, "{name}");
        }
        assert_eq!(file.index_state(), None, "no pass was needed");
        assert!(walk(&mut file).unwrap() == members);
        assert_eq!(file.index_state(), Some(IndexState::Agrees));
        for (name, content) in &members {
            assert!(file.read(name, u64::MAX).unwrap() == *content, "{name}");
        }
    }
}

#[test]
fn the_tar_is_the_normalised_one() {
    let members = large();
    let bytes = seal(&members);
    let (_, directory) = directory_of(&bytes);
    let plain = zstd::stream::decode_all(&bytes[..]).unwrap();
    assert!(plain == ended(tar_of(&members)));
    // frames of first.txt; big.bin at 0..=5 MiB; whole.bin at 0 and 1 MiB; last.txt; the end
    let big = 1024;
    let whole = big + 512 + (5 * MIB + 512) as u64;
    let last = whole + 512 + 2 * MIB as u64;
    let mib = MIB as u64;
    let expected = [0, big].into_iter().chain((1..=5).map(|k| big + 512 + k * mib)).chain([
        whole,
        whole + 512 + mib,
        last,
        last + 1024,
    ]);
    let starts: Vec<_> = directory.frames.iter().map(|frame| frame.uncompressed).collect();
    assert_eq!(starts, expected.collect::<Vec<_>>());
    for start in &directory.frames {
        let frame = &bytes[start.compressed as usize..];
        assert_eq!(frame[..4], [0x28, 0xb5, 0x2f, 0xfd]);
        // RFC 8878 §3.1.1.1.1: checksum flag set; content size present (flag above 0, or single segment)
        assert!(frame[4] & 0x04 != 0 && frame[4] & 0xE0 != 0);
    }
}

#[test]
fn archives_are_reproducible() {
    assert!(seal(&large()) == seal(&large()));
}

#[test]
fn a_range_costs_its_frames_only() {
    let members = large();
    let bytes = seal(&members);
    let mut file = archive(&bytes);
    let big = &members[1].1;
    let mib = MIB as u64;
    let mut last = 0;
    let mut cost = |file: &Archive<_>| {
        let since = file.frames_decoded() - last;
        last += since;
        since
    };
    assert_eq!(
        file.read_range("big.bin", 3 * mib + 5, 10).unwrap(),
        big[3 * MIB + 5..3 * MIB + 15]
    );
    assert_eq!(cost(&file), 2, "the header's frame and one more");
    assert_eq!(file.read_range("big.bin", 3 * mib, mib).unwrap(), big[3 * MIB..4 * MIB]);
    assert_eq!(cost(&file), 0, "the frame is kept");
    assert_eq!(
        file.read_range("big.bin", 2 * mib - 1, 2).unwrap(),
        big[2 * MIB - 1..2 * MIB + 1]
    );
    assert_eq!(cost(&file), 2);
    for decoded in [1, 0] {
        assert_eq!(file.read_range("big.bin", 5 * mib, 77).unwrap(), big[5 * MIB..]);
        assert_eq!(cost(&file), decoded);
    }
    assert!(file.read("big.bin", u64::MAX).unwrap() == *big);
    assert_eq!(cost(&file), 6);
    assert!(file.read_range("big.bin", 5 * mib + 77, 0).unwrap().is_empty());
    assert_eq!(cost(&file), 0);
    assert_eq!(file.read("last.txt", 4).unwrap(), b"last");
    assert_eq!(cost(&file), 2, "its one frame, for the header and for the content");
    assert!(matches!(
        file.read_range("big.bin", 5 * mib, 78).unwrap_err().kind(),
        ErrorKind::Value { .. }
    ));
    assert!(matches!(
        file.read_range("big.bin", u64::MAX, 2).unwrap_err().kind(),
        ErrorKind::Value { .. }
    ));
    assert!(matches!(
        file.read("last.txt", 3).unwrap_err().kind(),
        ErrorKind::TooLarge { .. }
    ));
    assert_eq!(file.index_state(), None);
}

/// More frames in turn than are kept: each piece is right, and those that were asked for last cost nothing.
#[test]
fn few_frames_are_kept() {
    let content: Vec<u8> = (0..20 * MIB).map(|at| (at / 1000 % 251) as u8).collect();
    let bytes = seal(&[("long.bin".into(), content.clone())]);
    let mut file = archive(&bytes);
    let mut costs = Vec::new();
    for piece in (0..20).chain((0..20).rev()) {
        let before = file.frames_decoded();
        let start = piece * MIB + 100;
        let read = file.read_range("long.bin", start as u64, 3000).unwrap();
        assert_eq!(read, content[start..start + 3000]);
        costs.push(file.frames_decoded() - before);
    }
    // the first one is opened for its header too
    let expected = [[2].as_slice(), &[1; 19], &[0; 12], &[1; 8]].concat();
    assert_eq!(costs, expected);
}

#[test]
fn a_missing_member_is_looked_for_in_the_whole_file_once() {
    let bytes = seal(&large());
    let mut file = archive(&bytes);
    let error = file.read("absent", 1).unwrap_err();
    assert_eq!(
        error.to_string(),
        "absent: the member is missing, expected a member of this name [archive.missing]"
    );
    assert_eq!(file.index_state(), Some(IndexState::Agrees));
    let decoded = file.frames_decoded();
    assert_eq!(file.find("absent").unwrap(), None);
    assert_eq!(file.find("FIRST.TXT").unwrap(), None);
    assert_eq!(file.frames_decoded(), decoded);
    assert_eq!(file.find("last.txt").unwrap().map(|member| member.size), Some(4));
}

#[test]
fn repacked_files_stay_readable() {
    let members = large();
    let plain = ended(tar_of(&members));
    let halves = plain.split_at(plain.len() / 2 + 3);
    let parts = |parts: &[&[u8]]| parts.iter().flat_map(|part| one_frame(part)).collect::<Vec<_>>();
    for (what, file) in [
        ("one frame", one_frame(&plain)),
        (
            "streamed, without content size and checksum",
            zstd::stream::encode_all(&plain[..], 1).unwrap(),
        ),
        ("two frames", parts(&[halves.0, halves.1])),
        ("empty frames between", parts(&[b"", halves.0, b"", b"", halves.1])),
        ("without index", {
            let bytes = seal(&members);
            bytes[..directory_of(&bytes).0].to_vec()
        }),
    ] {
        let mut opened = archive(&file);
        let range = opened.read_range("big.bin", 4 * MIB as u64, 99).unwrap();
        assert_eq!(range, members[1].1[4 * MIB..4 * MIB + 99], "{what}");
        assert_eq!(opened.index_state(), Some(IndexState::Absent), "{what}");
        assert!(walk(&mut opened).unwrap() == members, "{what}");
        for (name, content) in &members {
            assert!(opened.read(name, u64::MAX).unwrap() == *content, "{what}: {name}");
        }
    }
}

#[test]
fn every_truncation_is_an_error() {
    let members = small();
    let bytes = seal(&members);
    let (index_at, _) = directory_of(&bytes);
    for cut in 0..bytes.len() {
        let mut file = archive(&bytes[..cut]);
        if cut == index_at {
            // without its index the file is whole in another lawful form
            assert!(walk(&mut file).unwrap() == members);
            assert_eq!(file.index_state(), Some(IndexState::Absent));
            continue;
        }
        assert!(walk(&mut file).is_err(), "cut at {cut}");
        assert!(file.members().is_err(), "cut at {cut}");
        assert!(file.read("record.json", 100).is_err(), "cut at {cut}");
    }
    let one = one_frame(&ended(tar_of(&members)));
    for cut in 0..one.len() {
        assert!(walk(&mut archive(&one[..cut])).is_err(), "one frame, cut at {cut}");
    }
    let tar = ended(tar_of(&members));
    for cut in 0..tar.len() {
        refused(&one_frame(&tar[..cut]));
    }
}

#[test]
fn no_flipped_bit_changes_a_content_silently() {
    let members = small();
    let bytes = seal(&members);
    let (index_at, _) = directory_of(&bytes);
    let mut accepted = 0;
    for bit in 0..8 * bytes.len() {
        let mut flipped = bytes.clone();
        flipped[bit / 8] ^= 1 << (bit % 8);
        let mut file = archive(&flipped);
        match walk(&mut file) {
            Ok(met) => {
                assert!(met == members, "bit {bit}");
                accepted += usize::from(bit / 8 < index_at);
                if bit / 8 >= index_at {
                    assert_eq!(file.index_state(), Some(IndexState::Disagrees), "bit {bit}");
                }
            }
            // the payload of the index may hold anything
            Err(_) => assert!(bit / 8 < index_at + 8, "bit {bit}"),
        }
        let mut by_offset = archive(&flipped);
        for (name, content) in &members {
            if let Ok(read) = by_offset.read(name, u64::MAX) {
                assert!(read == *content, "bit {bit}");
            }
        }
    }
    // some bits mean nothing (RFC 8878 §3.1.1.1.1.3 leaves one in each frame header), but they are few
    assert!(accepted > members.len() && accepted < 8 * index_at / 100, "{accepted}");
}

#[test]
fn anything_behind_the_end_is_refused() {
    let bytes = seal(&small());
    let (index_at, _) = directory_of(&bytes);
    let index = &bytes[index_at..];
    let frames = &bytes[..index_at];
    let with = |parts: &[&[u8]]| refused(&parts.concat()).to_string();
    let skippable = b"\x50\x2a\x4d\x18\x03\0\0\0abc";
    for more in [
        &b"\0"[..],
        b"x",
        &[0; 1024],
        skippable,
        index,
        &one_frame(b""),
        &one_frame(b"more"),
    ] {
        with(&[&bytes, more]);
    }
    assert!(with(&[frames, &one_frame(&[0; 512]), index]).contains("after the end of the tar"));
    assert!(with(&[frames, &one_frame(b""), index]).contains("after the end of the tar"));
    assert!(with(&[skippable, &bytes]).contains("skippable zstd frame before"));
    assert!(with(&[index, frames]).contains("skippable zstd frame before"));
    assert!(
        with(&[&one_frame(&[ended(tar_of(&small())), vec![0; 512]].concat())]).contains("after the end of the tar")
    );
    assert!(with(&[&bytes, &bytes]).contains("last skippable frame ends at"));
    assert!(with(&[]).contains("ends inside the tar"));
    assert!(with(&[&one_frame(&[0; 1024])]).contains("nothing to check"));
    // a foreign skippable frame is no fault of the content
    let foreign = [frames, skippable].concat();
    let mut file = archive(&foreign);
    assert!(walk(&mut file).unwrap() == small());
    assert_eq!(file.index_state(), Some(IndexState::Disagrees));
}

#[test]
fn hostile_tars_are_refused() {
    let good = small();
    let plain = tar_of(&good);
    let reseal = |block: &mut [u8]| {
        block[148..156].fill(b' ');
        let sum: u32 = block[..512].iter().map(|&byte| u32::from(byte)).sum();
        block[148..156].copy_from_slice(format!("{sum:07o}\0").as_bytes());
    };
    let changed = |at: usize, bytes: &[u8]| {
        let mut tar = plain.clone();
        tar[at..at + bytes.len()].copy_from_slice(bytes);
        reseal(&mut tar[..512]);
        refused(&one_frame(&ended(tar)))
    };
    assert!(changed(156, b"2").to_string().contains("symbolic link"));
    assert!(changed(156, b"5").to_string().contains("directory"));
    assert!(changed(156, b"x").to_string().contains("pax"));
    assert!(changed(156, b"L").to_string().contains("GNU long name"));
    assert!(changed(0, b"../../x").to_string().contains("component"));
    assert!(changed(0, b"/").to_string().contains("absolute"));
    assert!(changed(136, b"00000000001").to_string().contains("mtime"));
    // a size of 2^32 + 1 and of the whole field
    let error = changed(124, b"40000000001");
    assert!(matches!(error.kind(), ErrorKind::TooLarge { .. }), "{error}");
    assert_eq!(error.location().member.as_deref(), Some("record.json"));
    assert_eq!(error.location().offset, Some(0));
    assert!(changed(124, b"37777777777").to_string().contains("ends"));
    let padded = refused(&one_frame(&{
        let mut tar = ended(plain.clone());
        tar[1023] = 1;
        tar
    }));
    assert_eq!(
        padded.to_string(),
        "record.json: at byte 525 of the uncompressed archive: damaged: padding: found byte 0x01, expected zeros \
         [archive.damaged]"
    );
    let twice = |name: &str| {
        let again = tar_of(&[(name.to_string(), b"other".to_vec())]);
        refused(&one_frame(&ended([plain.clone(), again].concat())))
    };
    assert!(twice("record.json").to_string().contains("second member"));
    assert!(twice("RECORD.json").to_string().contains("second member"));
    assert!(twice("ensembles").to_string().contains("folder"));
    assert!(twice("record.json/x").to_string().contains("folder"));
    assert_eq!(twice("record.json").location().offset, Some(plain.len() as u64));
    // one zero block, then a member
    let parted = [plain.clone(), vec![0; 512], plain.clone()].concat();
    assert!(
        refused(&one_frame(&ended(parted)))
            .to_string()
            .contains("second block of the end")
    );
}

#[test]
fn limits_hold() {
    let bytes = seal(&small());
    let walk_with = |limits| {
        let mut file = Archive::new(Cursor::new(&bytes[..]), limits).unwrap();
        file.walk(|_, _| Ok(()))
    };
    let limits = Limits::default();
    let tight = Limits {
        members: 4,
        member_bytes: 840,
        frames: 5,
        window_log: 11,
    };
    walk_with(tight).unwrap();
    assert!(matches!(
        walk_with(Limits { members: 3, ..limits }).unwrap_err().kind(),
        ErrorKind::TooLarge { .. }
    ));
    assert!(matches!(
        walk_with(Limits {
            member_bytes: 839,
            ..limits
        })
        .unwrap_err()
        .kind(),
        ErrorKind::TooLarge { .. }
    ));
    assert!(matches!(
        walk_with(Limits { frames: 4, ..limits }).unwrap_err().kind(),
        ErrorKind::Unsupported { .. }
    ));
    assert!(matches!(
        walk_with(Limits {
            window_log: 10,
            ..limits
        })
        .unwrap_err()
        .kind(),
        ErrorKind::Unsupported { .. }
    ));
}

/// An index that lies with a mended digest never changes what is read.
#[test]
fn a_forged_index_is_found_out() {
    let content = |text: &str| text.as_bytes().to_vec();
    let members: Content = vec![
        ("a".into(), content("aaaa")),
        ("b".into(), content("bbbb")),
        ("c".into(), noise(MIB + 10, 8)),
        ("d".into(), content("dddd")),
    ];
    let bytes = seal(&members);
    let (index_at, truth) = directory_of(&bytes);
    type Change<'a> = (&'a str, &'a dyn Fn(&mut Directory));
    let changes: [Change; 12] = [
        ("names swapped", &|d| {
            d.members[0].name = "b".into();
            d.members[1].name = "a".into();
        }),
        ("a name changed", &|d| d.members[1].name = "x".into()),
        ("a size changed", &|d| d.members[0].size = 5),
        ("a member left out", &|d| {
            d.members.remove(1);
            d.members[0].size = 1536;
        }),
        ("a member invented", &|d| {
            d.members[3].size = 0;
            let header_offset = d.members[3].header_offset + 512;
            d.members.push(Member {
                name: "e".into(),
                header_offset,
                size: 0,
            });
        }),
        ("frame moved in the file", &|d| d.frames[1].compressed += 1),
        ("frame moved in the tar", &|d| d.frames[1].uncompressed += 1),
        ("frame moved in the tar, other way", &|d| {
            d.frames[3].uncompressed -= 512
        }),
        ("a frame left out", &|d| {
            d.frames.remove(1);
        }),
        ("a frame inside a member left out", &|d| {
            d.frames.remove(3);
        }),
        ("a frame invented", &|d| {
            d.frames.insert(
                1,
                FrameStart {
                    uncompressed: 512,
                    compressed: 20,
                },
            );
        }),
        ("frames of others", &|d| {
            let first = d.frames[1].compressed;
            d.frames[1].compressed = d.frames[2].compressed;
            d.frames[2].compressed = d.frames[1].compressed + 1;
            assert_ne!(first, d.frames[1].compressed);
        }),
    ];
    for (what, change) in changes {
        let mut forged = truth.clone();
        change(&mut forged);
        let file = [&bytes[..index_at], &index::encode(&forged).unwrap()].concat();
        assert_eq!(
            directory_of(&file).1,
            forged,
            "{what}: consistent in itself, else this shows nothing"
        );
        let mut opened = archive(&file);
        for (name, content) in &members {
            assert!(opened.read(name, u64::MAX).unwrap() == *content, "{what}: {name}");
            let mut fresh = archive(&file);
            let half = content.len() as u64 / 2;
            assert_eq!(
                fresh.read_range(name, half, 2).unwrap(),
                content[half as usize..half as usize + 2],
                "{what}"
            );
            assert!(
                matches!(fresh.read("e", 9).unwrap_err().kind(), ErrorKind::Missing { .. }),
                "{what}"
            );
        }
        assert!(walk(&mut opened).unwrap() == members, "{what}");
        assert_eq!(opened.index_state(), Some(IndexState::Disagrees), "{what}");
    }
}

#[test]
fn padding_is_checked_by_offset_too() {
    let members = vec![("a".to_string(), b"aaaa".to_vec())];
    let (_, truth) = directory_of(&seal(&members));
    let mut tar = tar_of(&members);
    tar[600] = 1;
    let (first, end) = (one_frame(&tar), one_frame(&[0; 1024]));
    let mut directory = truth;
    directory.frames[1].compressed = first.len() as u64;
    directory.end.compressed = (first.len() + end.len()) as u64;
    let file = [first, end, index::encode(&directory).unwrap()].concat();
    let mut opened = archive(&file);
    // outside the padding nothing is wrong, and no pass is made
    assert_eq!(opened.read_range("a", 0, 4).unwrap(), b"aaaa");
    let error = opened.read("a", 4).unwrap_err();
    assert!(error.to_string().contains("padding: found byte 0x01"), "{error}");
}

/// A frame that the index calls small but that decodes to a gibibyte is left as soon as it is too long.
#[test]
fn a_frame_longer_than_the_index_says_is_left_at_once() {
    let bytes = seal(&small());
    let (_, truth) = directory_of(&bytes);
    let bomb = {
        let mut encoder = zstd::stream::Encoder::new(Vec::new(), 1).unwrap();
        encoder.write_all(&header("record.json", 13)).unwrap();
        for _ in 0..64 {
            encoder.write_all(&[0; MIB]).unwrap();
        }
        encoder.finish().unwrap()
    };
    let shift = |compressed: u64| compressed - truth.frames[1].compressed + bomb.len() as u64;
    let mut forged = truth.clone();
    forged
        .frames
        .iter_mut()
        .skip(1)
        .for_each(|frame| frame.compressed = shift(frame.compressed));
    forged.end.compressed = shift(forged.end.compressed);
    let rest = &bytes[truth.frames[1].compressed as usize..truth.end.compressed as usize];
    let file = [&bomb, rest, &index::encode(&forged).unwrap()].concat();
    let error = archive(&file).read("record.json", 100).unwrap_err();
    assert!(matches!(error.kind(), ErrorKind::Damaged { .. }), "{error}");
}

#[test]
fn a_visitor_may_read_little_stop_or_swallow_a_fault() {
    let members = large();
    let bytes = seal(&members);
    let mut met = 0;
    archive(&bytes)
        .walk(|member, content| {
            met += 1;
            let mut first = [0; 3];
            content.read_exact(&mut first).unwrap();
            assert_eq!(first, members[met - 1].1[..3], "{}", member.name);
            Ok(())
        })
        .unwrap();
    assert_eq!(met, members.len());
    let stopped = archive(&bytes).walk(|member, _| match member.name.as_str() {
        "whole.bin" => Err(ErrorKind::Stopped.into()),
        _ => Ok(()),
    });
    assert!(matches!(stopped.unwrap_err().kind(), ErrorKind::Stopped));
    let mut damaged = bytes.clone();
    damaged[2 * MIB] ^= 1;
    let swallowed = archive(&damaged).walk(|_, content| {
        let mut sink = Vec::new();
        let _ = content.read_to_end(&mut sink);
        Ok(())
    });
    let error = swallowed.unwrap_err();
    // the same where the visitor passes on what it sees
    assert!(matches!(
        walk(&mut archive(&damaged)).unwrap_err().kind(),
        ErrorKind::Damaged { .. }
    ));
    // a range is not given out before the checksum of its frame has been compared
    let range = archive(&damaged).read_range("big.bin", MIB as u64 + 1, 10);
    assert!(matches!(range.unwrap_err().kind(), ErrorKind::Damaged { .. }));
    assert!(matches!(error.kind(), ErrorKind::Damaged { .. }), "{error}");
    assert_eq!(error.location().member.as_deref(), Some("big.bin"));
}

#[test]
fn a_writer_refuses_what_a_reader_would() {
    let mut writer = Writer::new(Vec::new()).unwrap();
    assert!(matches!(
        writer.add("../a", b"").unwrap_err().kind(),
        ErrorKind::Unsupported { .. }
    ));
    assert!(matches!(
        writer.add("a", b"").unwrap_err().kind(),
        ErrorKind::Conflict { .. }
    ));
    assert!(writer.finish().is_err());
    let after = |second: &dyn Fn(&mut Writer<Vec<u8>>) -> Result<Digest>| {
        let mut writer = Writer::new(Vec::new()).unwrap();
        writer.add("a/b", b"x").unwrap();
        let error = second(&mut writer).unwrap_err();
        assert!(writer.finish().is_err());
        error
    };
    assert!(matches!(
        after(&|writer| writer.add("A/B", b"x")).kind(),
        ErrorKind::Damaged { .. }
    ));
    assert!(matches!(
        after(&|writer| writer.add("a", b"x")).kind(),
        ErrorKind::Damaged { .. }
    ));
    let short = after(&|writer| writer.add_from("c", 5, &b"1234"[..]));
    assert_eq!(short.to_string(), "c: found 4 bytes, expected 5 bytes [archive.value]");
    assert!(matches!(
        after(&|writer| writer.add_from("c", 3, &b"1234"[..])).kind(),
        ErrorKind::Value { .. }
    ));
    let huge = after(&|writer| writer.add_from("c", (1 << 32) + 1, std::io::repeat(0)));
    assert!(matches!(huge.kind(), ErrorKind::TooLarge { .. }));
    assert!(matches!(
        Writer::new(Vec::new()).unwrap().finish().unwrap_err().kind(),
        ErrorKind::Nothing { .. }
    ));
    struct Full;
    impl Write for Full {
        fn write(&mut self, _: &[u8]) -> std::io::Result<usize> {
            Err(std::io::Error::from(std::io::ErrorKind::StorageFull))
        }
        fn flush(&mut self) -> std::io::Result<()> {
            Ok(())
        }
    }
    assert!(matches!(
        Writer::new(Full).unwrap().add("a", b"x").unwrap_err().kind(),
        ErrorKind::Io { .. }
    ));
}

#[test]
fn errors_name_the_file() {
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("run.tar.zst");
    assert!(matches!(
        Archive::open(&path).err().unwrap().kind(),
        ErrorKind::Io { .. }
    ));
    std::fs::write(&path, b"PK\x03\x04").unwrap();
    let error = Archive::open(&path).unwrap().members().unwrap_err();
    assert_eq!(error.location().path.as_deref(), Some(path.as_path()));
    assert!(error.to_string().contains("found 0x04034b50"), "{error}");
}

/// GNU tar and zstd of the system read what we write (left out where they are not installed, unless `PASTPROOF_TEST_TOOLS=required`, as in CI).
#[test]
fn system_tools_unpack_it() {
    let works = |program: &str| {
        Command::new(program)
            .arg("--version")
            .output()
            .is_ok_and(|run| run.status.success())
    };
    if !works("zstd") || !works("tar") {
        assert!(
            std::env::var_os("PASTPROOF_TEST_TOOLS").is_none(),
            "no zstd or tar on this machine"
        );
        return;
    }
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("run.tar.zst");
    let members = large();
    std::fs::write(&path, seal(&members)).unwrap();
    let run = |program: &str, arguments: &[&str]| {
        let run = Command::new(program)
            .current_dir(folder.path())
            .args(arguments)
            .output()
            .unwrap();
        assert!(
            run.status.success(),
            "{program} {arguments:?}: {}",
            String::from_utf8_lossy(&run.stderr)
        );
        assert!(
            run.stderr.is_empty() || program == "zstd",
            "{}",
            String::from_utf8_lossy(&run.stderr)
        );
    };
    run("zstd", &["-t", "run.tar.zst"]);
    run("tar", &["--zstd", "-xf", "run.tar.zst"]);
    for (name, content) in &members {
        assert!(std::fs::read(folder.path().join(name)).unwrap() == *content, "{name}");
    }
    // and we read what they repack
    run("zstd", &["-q", "-d", "run.tar.zst", "-o", "plain.tar"]);
    run("zstd", &["-q", "-9", "plain.tar", "-o", "again.tar.zst"]);
    let mut again = Archive::open(&folder.path().join("again.tar.zst")).unwrap();
    assert!(again.read("big.bin", u64::MAX).unwrap() == members[1].1);
    assert_eq!(again.index_state(), Some(IndexState::Absent));
}

fn any_members() -> impl Strategy<Value = Content> {
    let content = prop_oneof![
        prop::collection::vec(any::<u8>(), 0..3000),
        (0_usize..8, 0_usize..3).prop_map(|(blocks, extra)| noise(512 * blocks + extra, 11)),
        (MIB - 2..MIB + 3).prop_map(|length| vec![1; length]),
    ];
    prop::collection::vec(content, 1..6).prop_map(|contents| {
        let named = |(number, content)| (format!("m{number}/{}", "n".repeat(number * 19)) + "x", content);
        contents.into_iter().enumerate().map(named).collect()
    })
}

proptest! {
    #![proptest_config(ProptestConfig {
        cases: 48,
        rng_seed: proptest::test_runner::RngSeed::Fixed(1),
        failure_persistence: None,
        ..ProptestConfig::default()
    })]

    #[test]
    fn any_members_make_the_round_trip(members in any_members(), choose in any::<[u16; 3]>()) {
        let bytes = seal(&members);
        let mut file = archive(&bytes);
        let (name, content) = &members[usize::from(choose[0]) % members.len()];
        let start = usize::from(choose[1]) % (content.len() + 1);
        let length = usize::from(choose[2]) % (content.len() - start + 1);
        let range = file.read_range(name, start as u64, length as u64).unwrap();
        prop_assert_eq!(&range[..], &content[start..start + length]);
        prop_assert_eq!(file.index_state(), None);
        prop_assert!(walk(&mut file).unwrap() == members);
        prop_assert_eq!(file.index_state(), Some(IndexState::Agrees));
    }

    #[test]
    fn no_bytes_make_it_panic(bytes in prop::collection::vec(any::<u8>(), 0..400), at in any::<u16>(), keep in any::<bool>()) {
        // noise as it is, and noise written over a good file
        let mut file = seal(&small());
        if keep {
            let at = usize::from(at) % file.len();
            let count = bytes.len().min(file.len() - at);
            file[at..at + count].copy_from_slice(&bytes[..count]);
        } else {
            file = bytes;
        }
        let mut opened = archive(&file);
        for (name, content) in small() {
            if let Ok(read) = opened.read(&name, u64::MAX) {
                prop_assert!(read == content);
            }
        }
        if let Ok(met) = walk(&mut opened) {
            prop_assert!(met == small());
        }
    }
}
