//! Members of the tar: which names are allowed and what a header must hold.
//!
//! The header of a member follows from its name and size alone, so it is checked by making it
//! anew and comparing all 512 bytes: nothing can hide in a field that nobody reads. Writer and
//! reader share the rules of this file, so what is written can be read.

use std::collections::BTreeSet;
use std::ops::Range;

use crate::error::{Error, ErrorKind, Result};

/// The unit of a tar: headers are one block, contents are padded to whole blocks.
pub(super) const BLOCK: usize = 512;

/// Two zero blocks end a tar.
pub(super) const TAR_END: u64 = 2 * BLOCK as u64;

/// Longest name in bytes, that of the ustar name field.
const NAME_BYTES: usize = 100;

/// A regular file in the archive.
#[derive(Clone, PartialEq, Eq, Debug)]
pub struct Member {
    /// The name, its components parted by `/`.
    pub name: String,
    /// Where its tar header begins in the uncompressed archive.
    pub header_offset: u64,
    /// The length of its content in bytes.
    pub size: u64,
}

impl Member {
    /// Where its content begins in the uncompressed archive.
    pub fn content_offset(&self) -> u64 {
        self.header_offset + BLOCK as u64
    }

    /// Where the next header begins; `None` beyond 64 bits.
    pub(super) fn end(&self) -> Option<u64> {
        let padded = self.size.checked_next_multiple_of(BLOCK as u64)?;
        self.header_offset.checked_add(BLOCK as u64)?.checked_add(padded)
    }
}

/// The number of zero bytes after a content of `size` bytes.
pub(super) fn padding(size: u64) -> usize {
    let over = (size % BLOCK as u64) as usize;
    (BLOCK - over) % BLOCK
}

/// Refuses a name that could leave the folder it is unpacked in, or mean different files on different systems.
///
/// Allowed are ASCII letters, digits, `.`, `_`, `-`, `+`, `=`, `,` and `@`, in components parted by single slashes; no
/// component is `.` or `..` or begins with `-`, and at most 100 bytes in all. This leaves no absolute name, drive
/// letter, backslash, space or control character.
pub(in crate::archive) fn check_name(name: &[u8]) -> Result<&str> {
    let refused = |why: &str| {
        let shown = name[..name.len().min(NAME_BYTES)].escape_ascii();
        Error::from(ErrorKind::Unsupported {
            what: format!("member name \"{shown}\" {why}"),
        })
    };
    if name.is_empty() {
        return Err(refused("is empty"));
    }
    if name.len() > NAME_BYTES {
        return Err(refused("is longer than 100 bytes"));
    }
    let allowed = |byte: &u8| byte.is_ascii_alphanumeric() || b"._-+=,@/".contains(byte);
    let Some(name) = std::str::from_utf8(name).ok().filter(|_| name.iter().all(allowed)) else {
        return Err(refused("has a character other than letters, digits and ._-+=,@/"));
    };
    for component in name.split('/') {
        match component {
            "" => return Err(refused("is absolute or has an empty component")),
            "." | ".." => return Err(refused("has a component . or ..")),
            _ if component.starts_with('-') => return Err(refused("has a component that begins with -")),
            _ => {}
        }
    }
    Ok(name)
}

/// The names met so far. No two may fall together where case does not count, and no name may be
/// both a file and a folder.
#[derive(Default)]
pub(in crate::archive) struct Names {
    files: BTreeSet<String>,
    folders: BTreeSet<String>,
}

impl Names {
    /// Takes the next name.
    pub(in crate::archive) fn insert(&mut self, name: &str) -> Result<()> {
        let folded = name.to_ascii_lowercase();
        let parents = || folded.match_indices('/').map(|(end, _)| &folded[..end]);
        if self.folders.contains(&folded) || parents().any(|parent| self.files.contains(parent)) {
            return Err(Error::damaged("a member name is also a folder of another member").in_member(name));
        }
        for parent in parents() {
            if !self.folders.contains(parent) {
                self.folders.insert(parent.to_string());
            }
        }
        if !self.files.insert(folded) {
            return Err(Error::damaged("a second member of this name (case does not count)").in_member(name));
        }
        Ok(())
    }
}

/// The only header that a member of this name and size may have.
///
/// # Panics
/// If the name is longer than 100 bytes or the size is beyond 11 octal digits; see [`check_name`].
pub(super) fn header(name: &str, size: u64) -> [u8; BLOCK] {
    assert!(size < 1 << 33, "the ustar size field holds 11 octal digits");
    let mut header = tar::Header::new_ustar();
    header.as_old_mut().name[..name.len()].copy_from_slice(name.as_bytes());
    header.set_mode(0o644);
    header.set_uid(0);
    header.set_gid(0);
    header.set_size(size);
    header.set_mtime(0);
    header.set_entry_type(tar::EntryType::Regular);
    header.set_cksum();
    *header.as_bytes()
}

/// The fields of a ustar header (POSIX.1-1988, ustar interchange format), without the checksum, which follows from them.
const FIELDS: [(&str, Range<usize>); 16] = [
    ("name", 0..100),
    ("mode", 100..108),
    ("uid", 108..116),
    ("gid", 116..124),
    ("size", 124..136),
    ("mtime", 136..148),
    ("type", 156..157),
    ("link name", 157..257),
    ("magic", 257..263),
    ("version", 263..265),
    ("owner name", 265..297),
    ("group name", 297..329),
    ("device major", 329..337),
    ("device minor", 337..345),
    ("name prefix", 345..500),
    ("reserved", 500..512),
];

/// The name and size in a header that is exactly as [`header`] makes it.
pub(super) fn parse_header(block: &[u8; BLOCK]) -> Result<(String, u64)> {
    // the checksum first: where it fails, no other field is worth a message
    let sum: u32 = block.iter().map(|&byte| u32::from(byte)).sum();
    let stored: u32 = block[148..156].iter().map(|&byte| u32::from(byte)).sum();
    let found = sum - stored + 8 * u32::from(b' ');
    if octal(&block[148..156]) != Some(u64::from(found)) {
        return Err(Error::damaged(format!(
            "tar header checksum: found \"{}\", expected {found:07o}",
            block[148..156].escape_ascii()
        )));
    }
    if let Some(other) = other_type(block[156]) {
        return Err(ErrorKind::Unsupported {
            what: format!("{other} in the archive, expected regular files only"),
        }
        .into());
    }
    let length = block[..NAME_BYTES].iter().position(|&byte| byte == 0);
    let name = check_name(&block[..length.unwrap_or(NAME_BYTES)])?;
    let Some(size) = octal(&block[124..136]) else {
        return Err(Error::damaged(format!(
            "tar header size: found \"{}\", expected 11 octal digits",
            block[124..136].escape_ascii()
        ))
        .in_member(name));
    };
    let expected = header(name, size);
    for (field, range) in FIELDS {
        if block[range.clone()] != expected[range.clone()] {
            return Err(Error::damaged(format!(
                "tar header {field}: found \"{}\", expected \"{}\"",
                block[range.clone()].escape_ascii(),
                expected[range].escape_ascii()
            ))
            .in_member(name));
        }
    }
    Ok((name.to_string(), size))
}

/// A number of octal digits and one closing NUL, which fill the field.
fn octal(field: &[u8]) -> Option<u64> {
    let (&0, digits) = field.split_last()? else {
        return None;
    };
    digits.iter().try_fold(0, |value, digit| match digit {
        b'0'..=b'7' => Some(8 * value + u64::from(digit - b'0')),
        _ => None,
    })
}

/// What an entry is that is no regular file.
fn other_type(flag: u8) -> Option<String> {
    Some(
        match flag {
            b'0' => return None,
            b'1' => "a hard link",
            b'2' => "a symbolic link",
            b'3' | b'4' => "a device",
            b'5' => "a directory",
            b'6' => "a named pipe",
            b'g' | b'x' => "a pax extended header",
            b'K' | b'L' => "a GNU long name",
            b'S' => "a GNU sparse file",
            _ => return Some(format!("an entry of type \"{}\"", [flag].escape_ascii())),
        }
        .to_string(),
    )
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Expected bytes from POSIX.1-1988 (ustar): octal digits closed by NUL; the checksum is the sum of all bytes with
    /// the checksum field taken as spaces (worked out in the test).
    #[test]
    fn header_bytes() {
        let block = header("ensembles/0000/tree.bin", 96);
        let mut expected = [0_u8; 512];
        let mut put = |at: usize, text: &str| expected[at..at + text.len()].copy_from_slice(text.as_bytes());
        put(0, "ensembles/0000/tree.bin");
        put(100, "0000644\0");
        put(108, "0000000\0");
        put(116, "0000000\0");
        put(124, "00000000140\0");
        put(136, "00000000000\0");
        put(148, "        ");
        put(156, "0");
        put(257, "ustar\x0000");
        let sum: u32 = expected.iter().map(|&byte| u32::from(byte)).sum();
        expected[148..156].copy_from_slice(format!("{sum:07o}\0").as_bytes());
        assert_eq!(block, expected);
        assert_eq!(
            parse_header(&block).unwrap(),
            ("ensembles/0000/tree.bin".to_string(), 96)
        );
        let whole = "n".repeat(100);
        assert_eq!(parse_header(&header(&whole, 0)).unwrap(), (whole, 0));
    }

    fn reseal(block: &mut [u8; BLOCK]) {
        block[148..156].fill(b' ');
        let sum: u32 = block.iter().map(|&byte| u32::from(byte)).sum();
        block[148..156].copy_from_slice(format!("{sum:07o}\0").as_bytes());
    }

    #[test]
    fn every_changed_byte_is_refused() {
        let good = header("a/b.csv", 1234);
        for at in 0..BLOCK {
            for mask in [1, 0x80, 0xff] {
                let mut block = good;
                block[at] ^= mask;
                assert!(parse_header(&block).is_err(), "byte {at}, checksum as it was");
                reseal(&mut block);
                if block == good {
                    continue;
                }
                // with a mended checksum only another lawful name or size may pass
                if let Ok((name, size)) = parse_header(&block) {
                    let lawful = (at < 100 && name != "a/b.csv") || ((124..135).contains(&at) && size != 1234);
                    assert!(lawful, "byte {at}");
                }
            }
        }
    }

    #[test]
    fn messages_name_the_field() {
        let changed = |at: usize, bytes: &[u8]| {
            let mut block = header("plan.toml", 7);
            block[at..at + bytes.len()].copy_from_slice(bytes);
            reseal(&mut block);
            parse_header(&block).unwrap_err().to_string()
        };
        assert_eq!(
            changed(108, b"0001750"),
            "plan.toml: damaged: tar header uid: found \"0001750\\x00\", expected \"0000000\\x00\" [archive.damaged]"
        );
        for (at, bytes, word) in [
            (100, &b"0000755"[..], "mode"),
            (116, b"0000001", "gid"),
            (136, b"00000000001", "mtime"),
            (157, b"x", "link name"),
            (257, b"ustar ", "magic"),
            (263, b" ", "version"),
            (265, b"root", "owner name"),
            (297, b"root", "group name"),
            (329, b"0000000", "device major"),
            (345, b"p", "name prefix"),
            (511, b"x", "reserved"),
            (50, b"x", "name"),
            (124, b"0000000007 ", "size"),
            (124, b"\x80\0\0\0\0\0\0\0\0\0\0\x07", "size"),
        ] {
            let message = changed(at, bytes);
            assert!(message.contains(&format!("tar header {word}:")), "{message}");
        }
        for (flag, word) in [
            (b"1", "hard link"),
            (b"2", "symbolic link"),
            (b"3", "device"),
            (b"4", "device"),
            (b"5", "directory"),
            (b"6", "named pipe"),
            (b"7", "type \"7\""),
            (b"x", "pax"),
            (b"g", "pax"),
            (b"L", "GNU long name"),
            (b"K", "GNU long name"),
            (b"S", "sparse"),
            (b"\0", "type"),
        ] {
            let message = changed(156, flag);
            assert!(
                message.contains(word) && message.contains("archive.unsupported"),
                "{message}"
            );
        }
    }

    #[test]
    fn unsafe_names_are_refused() {
        for name in [
            "",
            "/etc/passwd",
            "a//b",
            "a/",
            "..",
            "../a",
            "a/../b",
            "a/..",
            ".",
            "./a",
            "a/./b",
            "a\\b",
            "C:a",
            "c:/a",
            "a b",
            "a\nb",
            "a\tb",
            "a\x7f",
            "\u{e9}",
            "a/-rf",
            "-x",
            "a*",
            "a?b",
            "a\"b",
            "~/a:b",
        ] {
            assert!(check_name(name.as_bytes()).is_err(), "{name:?}");
        }
        assert!(check_name(b"\xff").is_err());
        assert!(check_name(b"a\0b").is_err());
        assert!(check_name("n".repeat(101).as_bytes()).is_err());
        for name in [
            "MANIFEST.sha256",
            "a..b",
            "ensembles/0003/samples.csv",
            "x/.hidden",
            "p=0.5,L=16",
        ] {
            assert_eq!(check_name(name.as_bytes()).unwrap(), name);
        }
    }

    #[test]
    fn names_that_fall_together_are_refused() {
        let refused = |names: [&str; 2]| {
            let mut met = Names::default();
            met.insert(names[0]).unwrap();
            met.insert(names[1]).is_err()
        };
        assert!(refused(["a", "a"]));
        assert!(refused(["a/b", "A/B"]));
        assert!(refused(["a", "a/b"]));
        assert!(refused(["a/b/c", "A/b"]));
        assert!(!refused(["a/b", "a/c"]));
        assert!(!refused(["a", "ab"]));
    }

    #[test]
    fn padding_fills_whole_blocks() {
        assert_eq!([0, 1, 511, 512, 513].map(padding), [0, 511, 1, 0, 511]);
    }
}
