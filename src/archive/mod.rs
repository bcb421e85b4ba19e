//! What a run leaves on disk, byte by byte (`schema/ARCHIVE.md`).
//!
//! `container` knows names and bytes, `layout` the names of the members, `wire` their JSON, `table`,
//! `npy` and `manifest` their other forms; `reading` opens an archive as what its members mean. A
//! reader must outlive every engine, so nothing here knows one.

pub mod container;
pub mod layout;
pub mod manifest;
pub mod npy;
pub mod reading;
pub mod readme;
pub mod table;
pub mod wire;
