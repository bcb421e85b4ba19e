//! The index of offsets at the end of the file; its layout is defined in the [container](super) module.
//!
//! The index is a hint: reading it yields a [`Directory`] that is consistent in itself, or nothing.
//! Whether it tells the truth is for the reader to find out.

use crate::quantity::Digest;

use super::Limits;
use super::frames::{FrameStart, SKIPPABLE_HEADER};
use super::member::{Member, Names, TAR_END, check_name};

/// The magic number of the skippable frame that holds the index.
const FRAME_MAGIC: [u8; 4] = 0x184D_2A57_u32.to_le_bytes();

/// The last eight bytes of a file with an index.
const END_MAGIC: [u8; 8] = *b"ppindex\n";

const VERSION: u32 = 1;

/// The fixed last part of the index.
const FOOTER: usize = 80;

/// The last part of the footer, from which the beginning of the index is found.
pub(super) const TAIL: usize = 16;

/// Bytes of a frame in the index.
const FRAME_BYTES: usize = 16;

/// Bytes of a member in the index beside its name.
const MEMBER_BYTES: usize = 17;

/// Everything needed to find a byte of a member in the file.
#[derive(Clone, PartialEq, Eq, Debug)]
pub(super) struct Directory {
    /// The members in the order of the tar.
    pub(super) members: Vec<Member>,
    /// The frames of the tar.
    pub(super) frames: Vec<FrameStart>,
    /// The end of the tar and of the frames that hold it.
    pub(super) end: FrameStart,
}

/// The whole skippable frame for a directory; `None` if it would be longer than such a frame can be.
pub(super) fn encode(directory: &Directory) -> Option<Vec<u8>> {
    let mut payload = Vec::new();
    for member in &directory.members {
        payload.push(u8::try_from(member.name.len()).ok()?);
        payload.extend_from_slice(member.name.as_bytes());
        payload.extend_from_slice(&member.header_offset.to_le_bytes());
        payload.extend_from_slice(&member.size.to_le_bytes());
    }
    for frame in &directory.frames {
        payload.extend_from_slice(&frame.uncompressed.to_le_bytes());
        payload.extend_from_slice(&frame.compressed.to_le_bytes());
    }
    for number in [
        directory.members.len() as u64,
        directory.frames.len() as u64,
        directory.end.uncompressed,
        directory.end.compressed,
    ] {
        payload.extend_from_slice(&number.to_le_bytes());
    }
    let digest = Digest::of(&payload);
    payload.extend_from_slice(&digest.0);
    let length = u32::try_from(payload.len() + TAIL).ok()?.to_le_bytes();
    payload.extend_from_slice(&length);
    payload.extend_from_slice(&VERSION.to_le_bytes());
    payload.extend_from_slice(&END_MAGIC);
    Some([&FRAME_MAGIC[..], &length, &payload].concat())
}

/// The length of the index frame that ends with `tail`; `None` if it does not look like one or
/// could not be lawful in a file of `file_length` bytes.
pub(super) fn frame_length(tail: &[u8; TAIL], file_length: u64, limits: &Limits) -> Option<usize> {
    let mut fields = Fields(tail);
    let length = fields.u32()?;
    if fields.u32()? != VERSION || fields.0 != END_MAGIC {
        return None;
    }
    let largest = (limits.members.checked_mul((MEMBER_BYTES + 100) as u64)?)
        .checked_add(limits.frames.checked_mul(FRAME_BYTES as u64)?)?
        .checked_add(FOOTER as u64)?;
    let whole = u64::from(length) + SKIPPABLE_HEADER as u64;
    (u64::from(length) >= FOOTER as u64 && u64::from(length) <= largest && whole < file_length)
        .then(|| usize::try_from(whole).ok())
        .flatten()
}

/// The directory in an index frame that begins at `offset` of the file; `None` if it is not consistent.
pub(super) fn decode(frame: &[u8], offset: u64, limits: &Limits) -> Option<Directory> {
    let (magic, rest) = frame.split_first_chunk::<4>()?;
    let (length, payload) = rest.split_first_chunk::<4>()?;
    if *magic != FRAME_MAGIC || u32::from_le_bytes(*length) as usize != payload.len() {
        return None;
    }
    let (tables, footer) = payload.split_at_checked(payload.len().checked_sub(FOOTER)?)?;
    let mut footer = Fields(footer);
    let (member_count, frame_count) = (footer.u64()?, footer.u64()?);
    let end = FrameStart {
        uncompressed: footer.u64()?,
        compressed: footer.u64()?,
    };
    let digest = Digest(footer.take(32)?.try_into().ok()?);
    let covered = &payload[..payload.len() - TAIL - 32];
    if Digest::of(covered) != digest
        || footer.u32()? as usize != payload.len()
        || footer.u32()? != VERSION
        || footer.0 != END_MAGIC
    {
        return None;
    }
    // counts are held against the bytes that are there, before anything is allocated for them
    let least = member_count
        .checked_mul(MEMBER_BYTES as u64)?
        .checked_add(frame_count.checked_mul(FRAME_BYTES as u64)?)?;
    if member_count > limits.members || frame_count > limits.frames || least > tables.len() as u64 {
        return None;
    }
    let mut fields = Fields(tables);
    let members = read_members(&mut fields, member_count, end.uncompressed, limits)?;
    let frames = read_frames(&mut fields, frame_count, end)?;
    (fields.0.is_empty() && end.compressed == offset).then_some(Directory { members, frames, end })
}

/// Members: lawful names, and headers and contents that follow one another from 0 to the end of the tar without gaps.
fn read_members(fields: &mut Fields, count: u64, tar_length: u64, limits: &Limits) -> Option<Vec<Member>> {
    let mut members = Vec::with_capacity(count as usize);
    let mut names = Names::default();
    let mut next = 0;
    for _ in 0..count {
        let length = usize::from(fields.take(1)?[0]);
        let member = Member {
            name: check_name(fields.take(length)?).ok()?.to_string(),
            header_offset: fields.u64()?,
            size: fields.u64()?,
        };
        names.insert(&member.name).ok()?;
        if member.header_offset != next || member.size > limits.member_bytes {
            return None;
        }
        next = member.end()?;
        members.push(member);
    }
    (!members.is_empty() && next.checked_add(TAR_END) == Some(tar_length)).then_some(members)
}

/// Frames: from (0, 0), rising in both offsets up to the end.
fn read_frames(fields: &mut Fields, count: u64, end: FrameStart) -> Option<Vec<FrameStart>> {
    let mut frames: Vec<FrameStart> = Vec::with_capacity(count as usize);
    for _ in 0..count {
        let frame = FrameStart {
            uncompressed: fields.u64()?,
            compressed: fields.u64()?,
        };
        let follows = match frames.last() {
            None => frame.uncompressed == 0 && frame.compressed == 0,
            Some(last) => rises(*last, frame),
        };
        if !follows {
            return None;
        }
        frames.push(frame);
    }
    rises(*frames.last()?, end).then_some(frames)
}

fn rises(first: FrameStart, second: FrameStart) -> bool {
    first.uncompressed < second.uncompressed && first.compressed < second.compressed
}

/// Little-endian fields one after the other.
struct Fields<'a>(&'a [u8]);

impl<'a> Fields<'a> {
    fn take(&mut self, count: usize) -> Option<&'a [u8]> {
        let (taken, rest) = self.0.split_at_checked(count)?;
        self.0 = rest;
        Some(taken)
    }

    fn u32(&mut self) -> Option<u32> {
        Some(u32::from_le_bytes(self.take(4)?.try_into().ok()?))
    }

    fn u64(&mut self) -> Option<u64> {
        Some(u64::from_le_bytes(self.take(8)?.try_into().ok()?))
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn directory() -> Directory {
        let member = |name: &str, header_offset, size| Member {
            name: name.to_string(),
            header_offset,
            size,
        };
        let frame = |uncompressed, compressed| FrameStart {
            uncompressed,
            compressed,
        };
        Directory {
            members: vec![member("a", 0, 0), member("b/c", 512, 513), member("d", 2048, 1)],
            frames: vec![frame(0, 0), frame(512, 60), frame(2048, 130), frame(3072, 190)],
            end: frame(4096, 210),
        }
    }

    fn read(frame: &[u8], offset: u64) -> Option<Directory> {
        let limits = Limits::default();
        let tail = frame.last_chunk()?;
        let length = frame_length(tail, offset + frame.len() as u64, &limits)?;
        (length == frame.len())
            .then(|| decode(frame, offset, &limits))
            .flatten()
    }

    /// The layout of the module comment, byte by byte; the digest is worked out here.
    #[test]
    fn layout() {
        let small = Directory {
            members: vec![Member {
                name: "ab".into(),
                header_offset: 0,
                size: 3,
            }],
            frames: vec![FrameStart {
                uncompressed: 0,
                compressed: 0,
            }],
            end: FrameStart {
                uncompressed: 2048,
                compressed: 0x4321,
            },
        };
        let mut expected = vec![0x57, 0x2A, 0x4D, 0x18, 19 + 16 + 80, 0, 0, 0];
        expected.extend([2, b'a', b'b', 0, 0, 0, 0, 0, 0, 0, 0, 3, 0, 0, 0, 0, 0, 0, 0]);
        expected.extend([0; 16]);
        expected.extend([1, 0, 0, 0, 0, 0, 0, 0, 1, 0, 0, 0, 0, 0, 0, 0]);
        expected.extend([0, 8, 0, 0, 0, 0, 0, 0, 0x21, 0x43, 0, 0, 0, 0, 0, 0]);
        let digest = Digest::of(&expected[8..]);
        expected.extend(digest.0);
        expected.extend([19 + 16 + 80, 0, 0, 0, 1, 0, 0, 0]);
        expected.extend(b"ppindex\n");
        assert_eq!(encode(&small).unwrap(), expected);
        assert_eq!(read(&expected, 0x4321), Some(small));
    }

    #[test]
    fn every_flipped_bit_and_every_cut_makes_it_void() {
        let frame = encode(&directory()).unwrap();
        assert_eq!(read(&frame, 210), Some(directory()));
        assert_eq!(read(&frame, 211), None);
        for bit in 0..8 * frame.len() {
            let mut flipped = frame.clone();
            flipped[bit / 8] ^= 1 << (bit % 8);
            assert_eq!(read(&flipped, 210), None, "bit {bit}");
        }
        for cut in 0..frame.len() {
            assert_eq!(read(&frame[..cut], 210), None);
            assert_eq!(read(&frame[cut + 1..], 210), None);
        }
    }

    /// A forger mends the digest, so the contents themselves must be consistent.
    #[test]
    fn inconsistent_directories_are_void() {
        let forged = |change: &dyn Fn(&mut Directory)| {
            let mut changed = directory();
            change(&mut changed);
            read(&encode(&changed).unwrap(), changed.end.compressed)
        };
        assert!(forged(&|_| ()).is_some());
        let changes: [&dyn Fn(&mut Directory); 16] = [
            &|d| d.members[0].header_offset = 512,
            &|d| d.members[1].header_offset = 1024,
            &|d| d.members[1].size = 1025,
            &|d| d.members[2].size = 513,
            &|d| d.members[1].size = u64::MAX,
            &|d| d.members[1].name = "A".into(),
            &|d| d.members[1].name = "a/x".into(),
            &|d| d.members[1].name = "../x".into(),
            &|d| d.members[1].name = String::new(),
            &|d| d.members.clear(),
            &|d| d.frames[0].compressed = 1,
            &|d| d.frames[2].compressed = 60,
            &|d| d.frames[2].uncompressed = 512,
            &|d| d.frames.clear(),
            &|d| d.frames[3].uncompressed = 4096,
            &|d| d.end.uncompressed = 5120,
        ];
        for (number, change) in changes.iter().enumerate() {
            assert_eq!(forged(change), None, "change {number}");
        }
        let limits = Limits {
            members: 2,
            ..Limits::default()
        };
        assert_eq!(decode(&encode(&directory()).unwrap(), 210, &limits), None);
        let limits = Limits {
            frames: 3,
            ..Limits::default()
        };
        assert_eq!(decode(&encode(&directory()).unwrap(), 210, &limits), None);
    }
}
