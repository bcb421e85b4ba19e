//! The container: a tar in independent Zstandard frames, with an index of offsets behind it.
//!
//! Apart because it knows names and bytes only; what the members mean is said elsewhere. An
//! archive unpacks with any tar and zstd (`tar --zstd -xf`), and yet one member, or a part of one,
//! is read without decoding the rest. Nothing here ever unpacks to disk.
//!
//! What always holds: a reader takes sizes from a stranger's file only after checking them, keeps
//! bounded memory whatever the file says, and answers damage with an error. Only [`Archive::walk`]
//! sees every byte; what it has accepted is the whole truth about the file.
//!
//! # The tar
//!
//! POSIX ustar (POSIX.1-1988), regular files only. The header of a member follows from name and
//! size: mode `0000644`, uid, gid `0000000`, size in 11 octal digits, mtime `00000000000`,
//! checksum in 7 octal digits, each closed by one NUL; type `0`; magic `ustar` NUL, version `00`;
//! all other bytes NUL. Names are at most 100 bytes of ASCII letters, digits and `._-+=,@`, in
//! components parted by `/`; no component is empty, `.`, `..` or begins with `-`; no two names are
//! equal where case does not count, and none is a folder of another. Contents are padded with
//! zeros to 512 bytes. Two zero blocks end the tar, and nothing follows them.
//!
//! # The frames
//!
//! Zstandard (RFC 8878), level 3, each frame with content size and checksum. A frame begins at
//! every member's header, and within a member at every multiple of 1 MiB of its content (a
//! content that ends there begins no further frame); padding belongs to the frame before it. The
//! two zero blocks are a frame of their own. Compressed bytes differ between versions of zstd and
//! mean nothing. A reader takes any division into frames, so a file that was decompressed and
//! compressed anew, with or without index, stays readable; it refuses a window beyond 2^27 bytes
//! and dictionaries.
//!
//! # The index
//!
//! One skippable frame at the end of the file: magic number `0x184D2A57` and length of the rest
//! (u32 each), then the rest, all numbers little-endian:
//!
//! | bytes | what |
//! |---|---|
//! | 17 + name, for each member in tar order | u8 length of the name; the name; u64 offset of its header in the tar; u64 size |
//! | 16, for each frame in file order | u64 offset in the tar; u64 offset in the file |
//! | 8, 8 | u64 number of members; u64 number of frames |
//! | 8, 8 | u64 length of the tar; u64 offset of the skippable frame in the file |
//! | 32 | SHA-256 of the rest up to here |
//! | 4 | u32 length of the rest (again) |
//! | 4 | u32 version of this layout, 1 |
//! | 8 | `ppindex` and a line feed |
//!
//! The last 16 bytes of the file thus lead to the beginning of the index. The index is a hint and
//! never trusted: it is used only if it is consistent in itself (members without gaps from 0 to
//! the end of the tar, frames rising from 0), a member found through it has its header compared,
//! every frame decoded through it must begin and end where it says, and any disagreement, or a
//! name it does not list, leads to a pass over the whole file.

mod access;
mod frames;
mod index;
mod member;
mod reader;
mod writer;

pub use member::Member;
pub(super) use member::{Names, check_name};
pub use reader::Archive;
pub use writer::Writer;

/// What a reader takes at most from one archive.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub struct Limits {
    /// The number of members.
    pub members: u64,
    /// The size of a member in bytes; never beyond 2^33 - 1, which the tar header can hold.
    pub member_bytes: u64,
    /// The number of zstd frames.
    pub frames: u64,
    /// The binary logarithm of the largest zstd window in bytes, which the decoder may have to hold.
    pub window_log: u32,
}

impl Default for Limits {
    fn default() -> Self {
        Self {
            members: 1 << 20,
            member_bytes: 1 << 32,
            frames: 1 << 22,
            window_log: 27,
        }
    }
}

/// What a pass over the whole file found out about its index.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub enum IndexState {
    /// There is none.
    Absent,
    /// It lists exactly the members and frames of the file.
    Agrees,
    /// There is a skippable frame, but it holds no index of this file.
    Disagrees,
}

#[cfg(test)]
mod tests;
