//! The difference between a commit and a work tree, as a patch that `git apply` takes.
//!
//! Apart, because the headers are written here and not by git: the patch depends on the bytes on
//! the disk alone, not on the author's settings (`diff.*`, `core.autocrlf`, attributes, filters).
//! Files come in the order of their names' bytes, with full object names, three lines of context
//! and binary files in full. The digest is that of the patch. A patch beyond its limit cannot be
//! stored, so from there on, and for any file beyond it, lengths and SHA-256 values stand in for the
//! contents: the digest still tells two states apart, at the price of reading them once.

use std::fs::{self, File};
use std::io::Read;
use std::path::Path;

use git2::{DiffOptions, ObjectType, Oid, Repository, TreeEntry};
use pastproof::quantity::Digest;
use pastproof::quantity::Hasher;

/// The largest patch that is kept, in bytes.
pub const LIMIT: u64 = 64 << 20;

/// The bits of a mode that tell files, links and repositories apart.
pub const KIND: u32 = 0o170_000;
/// A file.
pub const FILE: u32 = 0o100_000;
/// A symbolic link.
pub const LINK: u32 = 0o120_000;
/// A repository within the repository.
const SUBMODULE: u32 = 0o160_000;

/// One side of a changed file.
pub struct Side {
    mode: u32,
    content: Content,
}

enum Content {
    Bytes(Vec<u8>),
    /// The commit of a repository within the repository, and whether it has changes of its own.
    Commit(String, bool),
    /// Too large for a patch.
    Large(String),
}

impl Side {
    /// The file as the commit has it.
    pub fn committed(repository: &Repository, entry: &TreeEntry<'_>, limit: u64) -> Result<Self, git2::Error> {
        let mode = mode_of(entry);
        let content = match mode {
            SUBMODULE => Content::Commit(entry.id().to_string(), false),
            _ if repository.odb()?.read_header(entry.id())?.0 as u64 > limit => {
                Content::Large(format!("git {}", entry.id()))
            }
            _ => Content::Bytes(repository.find_blob(entry.id())?.content().to_vec()),
        };
        Ok(Self { mode, content })
    }

    /// A repository within the work tree, at `commit`.
    pub fn submodule(commit: String, changed: bool) -> Self {
        Self {
            mode: SUBMODULE,
            content: Content::Commit(commit, changed),
        }
    }

    /// The file or symbolic link on the disk; none if there is neither. Where the file system keeps
    /// no executable bit or no links, the committed mode stays.
    pub fn on_disk(path: &Path, limit: u64, kept_mode: Option<u32>) -> std::io::Result<Option<Self>> {
        let found = match fs::symlink_metadata(path) {
            Ok(found) => found,
            Err(absent) if is_absent(&absent) => return Ok(None),
            Err(refusal) => return Err(refusal),
        };
        let (mode, content) = if found.is_symlink() {
            (LINK, Content::Bytes(path_bytes(&fs::read_link(path)?)))
        } else if found.is_file() {
            (
                kept_mode.unwrap_or_else(|| file_mode(&found)),
                read(File::open(path)?, limit)?,
            )
        } else {
            return Ok(None);
        };
        Ok(Some(Self { mode, content }))
    }

    /// The object name git gives the content, if it is at hand.
    fn object(&self) -> Option<String> {
        match &self.content {
            Content::Bytes(bytes) => Oid::hash_object(ObjectType::Blob, bytes).ok().map(|id| id.to_string()),
            Content::Commit(id, _) => Some(id.clone()),
            Content::Large(_) => None,
        }
    }

    /// What the hunks compare; none if the content is not at hand.
    fn text(&self) -> Option<Vec<u8>> {
        match &self.content {
            Content::Bytes(bytes) => Some(bytes.clone()),
            Content::Commit(id, changed) => {
                Some(format!("Subproject commit {id}{}\n", if *changed { "-dirty" } else { "" }).into_bytes())
            }
            Content::Large(_) => None,
        }
    }

    fn named(&self) -> String {
        match &self.content {
            Content::Large(name) => name.clone(),
            _ => format!("git {}", self.object().unwrap_or_default()),
        }
    }
}

/// The mode of a file in a commit.
pub fn mode_of(entry: &TreeEntry<'_>) -> u32 {
    u32::try_from(entry.filemode()).unwrap_or(0)
}

/// Reads a file, or only its digest once it proves longer than `limit`.
fn read(mut file: File, limit: u64) -> std::io::Result<Content> {
    let mut bytes = Vec::new();
    (&mut file).take(limit + 1).read_to_end(&mut bytes)?;
    if bytes.len() as u64 <= limit {
        return Ok(Content::Bytes(bytes));
    }
    let mut hasher = Hasher::default();
    hasher.update(&bytes);
    let length = bytes.len() as u64 + std::io::copy(&mut file, &mut hasher)?;
    Ok(Content::Large(format!("{length} bytes, SHA-256 {}", hasher.finish())))
}

fn is_absent(error: &std::io::Error) -> bool {
    matches!(
        error.kind(),
        std::io::ErrorKind::NotFound | std::io::ErrorKind::NotADirectory
    )
}

#[cfg(unix)]
fn file_mode(found: &fs::Metadata) -> u32 {
    use std::os::unix::fs::PermissionsExt as _;
    // git looks at the owner's bit alone
    if found.permissions().mode() & 0o100 == 0 {
        0o100_644
    } else {
        0o100_755
    }
}

#[cfg(not(unix))]
fn file_mode(_: &fs::Metadata) -> u32 {
    0o100_644
}

#[cfg(unix)]
fn path_bytes(path: &Path) -> Vec<u8> {
    use std::os::unix::ffi::OsStrExt as _;
    path.as_os_str().as_bytes().to_vec()
}

#[cfg(not(unix))]
fn path_bytes(path: &Path) -> Vec<u8> {
    path.to_string_lossy().replace('\\', "/").into_bytes()
}

/// A patch being written: its digest always, its bytes up to a limit.
pub struct Patch {
    limit: u64,
    length: u64,
    hasher: Hasher,
    kept: Vec<u8>,
}

impl Patch {
    /// An empty patch that keeps at most `limit` bytes.
    pub fn new(limit: u64) -> Self {
        Self {
            limit,
            length: 0,
            hasher: Hasher::default(),
            kept: Vec::new(),
        }
    }

    /// How long a file may be to stand in the patch in full: nothing, once the patch is too long.
    pub fn file_limit(&self) -> u64 {
        if self.length > self.limit { 0 } else { self.limit }
    }

    /// The digest, and the bytes if they stayed within the limit.
    pub fn finish(self) -> (Digest, Option<Vec<u8>>) {
        let kept = (self.length <= self.limit).then_some(self.kept);
        (self.hasher.finish(), kept)
    }

    fn push(&mut self, bytes: &[u8]) {
        self.hasher.update(bytes);
        self.length += bytes.len() as u64;
        if self.length <= self.limit {
            self.kept.extend_from_slice(bytes);
        } else {
            self.kept = Vec::new();
        }
    }

    /// Writes how `path` changed; nothing if both sides are equal. A file that was left out makes
    /// the patch longer than its limit, since it could not be stored without it.
    pub fn file(&mut self, path: &[u8], old: Option<&Side>, new: Option<&Side>) -> Result<(), git2::Error> {
        if let (Some(before), Some(after)) = (old, new) {
            if before.mode & KIND != after.mode & KIND {
                self.file(path, old, None)?;
                return self.file(path, None, new);
            }
        }
        let texts = (old.map(Side::text), new.map(Side::text));
        let same_content = matches!(&texts, (Some(Some(before)), Some(Some(after))) if before == after);
        let (old_name, new_name) = (prefixed(b"a/", path), prefixed(b"b/", path));
        let mut header = format!("diff --git {old_name} {new_name}\n");
        match (old, new) {
            (None, None) => return Ok(()),
            (None, Some(after)) => header += &format!("new file mode {:06o}\n", after.mode),
            (Some(before), None) => header += &format!("deleted file mode {:06o}\n", before.mode),
            (Some(before), Some(after)) if before.mode != after.mode => {
                header += &format!("old mode {:06o}\nnew mode {:06o}\n", before.mode, after.mode);
            }
            _ if same_content => return Ok(()),
            _ => {}
        }
        self.push(header.as_bytes());
        if same_content {
            return Ok(());
        }
        let (Some(before), Some(after)) = (texts.0.unwrap_or(Some(Vec::new())), texts.1.unwrap_or(Some(Vec::new())))
        else {
            let name = |side: Option<&Side>| side.map_or("nothing".to_string(), Side::named);
            self.push(format!("content left out: {} to {}\n", name(old), name(new)).as_bytes());
            self.length = self.length.max(self.limit + 1);
            self.kept = Vec::new();
            return Ok(());
        };
        let object = |side: Option<&Side>| side.and_then(Side::object).unwrap_or_else(|| "0".repeat(40));
        let mode = match (old, new) {
            (Some(before), Some(after)) if before.mode == after.mode => format!(" {:06o}", after.mode),
            _ => String::new(),
        };
        self.push(format!("index {}..{}{mode}\n", object(old), object(new)).as_bytes());
        let name = |side: Option<&Side>, name: &str| match side {
            None => "/dev/null".to_string(),
            // a tab ends a name with a space in it, for programs that look for a date
            Some(_) if path.contains(&b' ') => format!("{name}\t"),
            Some(_) => name.to_string(),
        };
        self.hunks(
            &before,
            &after,
            &format!("--- {}\n+++ {}\n", name(old, &old_name), name(new, &new_name)),
        )
    }

    /// Writes the changed lines, after `names`, or the changed bytes of a binary file.
    fn hunks(&mut self, old: &[u8], new: &[u8], names: &str) -> Result<(), git2::Error> {
        let mut options = DiffOptions::new();
        options.show_binary(true).context_lines(3).interhunk_lines(0);
        let mut patch = git2::Patch::from_buffers(old, None, new, None, Some(&mut options))?;
        let mut named = false;
        patch.print(&mut |_, _, line: git2::DiffLine<'_>| {
            let origin = line.origin();
            if !named && origin == 'H' {
                self.push(names.as_bytes());
                named = true;
            }
            match origin {
                'F' => return true,
                '+' | '-' | ' ' => self.push(&[origin as u8]),
                _ => {}
            }
            self.push(line.content());
            true
        })
    }
}

fn prefixed(prefix: &[u8], path: &[u8]) -> String {
    quoted(&[prefix, path].concat())
}

/// A name as git writes it in a patch: in quotes, with escapes, if it is not plain ASCII.
pub fn quoted(name: &[u8]) -> String {
    let plain = |byte: &u8| matches!(byte, b' '..=b'~') && !b"\"\\".contains(byte);
    if name.iter().all(plain) {
        return String::from_utf8_lossy(name).into_owned();
    }
    let mut text = String::from("\"");
    for byte in name {
        match byte {
            b'\t' => text += "\\t",
            b'\n' => text += "\\n",
            b'"' => text += "\\\"",
            b'\\' => text += "\\\\",
            byte if plain(byte) => text.push(char::from(*byte)),
            byte => text += &format!("\\{byte:03o}"),
        }
    }
    text + "\""
}
