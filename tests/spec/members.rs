//! An archive as an ordered list of names and bytes, read with plain tar and zstd.
//!
//! Apart from the library's reader, which is what these tests doubt. Written back with the library's writer, because
//! a forger would use it too.

use std::collections::BTreeMap;
use std::fs::File;
use std::io::Read;
use std::path::{Path, PathBuf};

use pastproof::archive::container::Writer;
use serde_json::Value;

/// The members of an archive in their order.
#[derive(Clone)]
pub struct Members(pub Vec<(String, Vec<u8>)>);

/// An archive in the folder of the golden ones.
pub fn golden(file: &str) -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).join("archives").join(file)
}

impl Members {
    /// Reads `path`, every member, in order.
    pub fn open(path: &Path) -> Self {
        let tar = zstd::decode_all(File::open(path).unwrap()).unwrap();
        let mut archive = tar::Archive::new(tar.as_slice());
        let members = archive.entries().unwrap().map(|entry| {
            let mut entry = entry.unwrap();
            let name = entry.path().unwrap().to_str().unwrap().to_string();
            let mut bytes = Vec::new();
            entry.read_to_end(&mut bytes).unwrap();
            (name, bytes)
        });
        Self(members.collect())
    }

    /// Writes them to `path`, in their order.
    pub fn write(&self, path: &Path) {
        let mut writer = Writer::new(File::create(path).unwrap()).unwrap();
        for (name, bytes) in &self.0 {
            writer.add(name, bytes).unwrap();
        }
        writer.finish().unwrap();
    }

    /// The place of a member, which must be there.
    pub fn place(&self, name: &str) -> usize {
        let found = self.0.iter().position(|(member, _)| member == name);
        found.unwrap_or_else(|| panic!("{name} is not there"))
    }

    pub fn has(&self, name: &str) -> bool {
        self.0.iter().any(|(member, _)| member == name)
    }

    pub fn bytes(&self, name: &str) -> &[u8] {
        &self.0[self.place(name)].1
    }

    pub fn text(&self, name: &str) -> &str {
        std::str::from_utf8(self.bytes(name)).unwrap()
    }

    pub fn json(&self, name: &str) -> Value {
        serde_json::from_slice(self.bytes(name)).unwrap()
    }

    pub fn set(&mut self, name: &str, bytes: impl Into<Vec<u8>>) {
        let place = self.place(name);
        self.0[place].1 = bytes.into();
    }

    /// What two runs of one plan with one program and one checkout have in common: all but the circumstances and
    /// their line in the manifest (`schema/ARCHIVE.md` §3).
    pub fn in_common(&self) -> BTreeMap<String, Vec<u8>> {
        self.without(&["circumstances.json"])
    }

    /// All members but these, whose lines are taken from the manifest too.
    pub fn without(&self, names: &[&str]) -> BTreeMap<String, Vec<u8>> {
        let mut members: BTreeMap<_, _> = self.0.iter().cloned().collect();
        members.retain(|name, _| !names.contains(&name.as_str()));
        let manifest = self.text("MANIFEST.sha256");
        let lines = manifest
            .split_inclusive('\n')
            .filter(|line| !names.iter().any(|name| line.ends_with(&format!("  {name}\n"))));
        members.insert("MANIFEST.sha256".into(), lines.collect::<String>().into_bytes());
        members
    }
}
