//! The author's repository around a plan: its commit, its state, its address.
//!
//! Apart, because it is the only part of the program that reads the files of others' tools. It
//! never writes to the repository, not even to refresh its index, and tells neither a user, a
//! machine nor an absolute path: names of files stand relative to the top of the repository.
//!
//! What git itself calls unchanged counts as such, with its settings (ignored files, line ends)
//! and its trust in time stamps; two flags by which an author hides changes from git are not
//! heeded. A filter that only git can run (large-file storage) may make a file look changed.

mod address;
mod changes;
mod patch;
#[cfg(all(test, unix))]
mod tests;

use std::fs;
use std::path::{Path, PathBuf};

use git2::{ErrorCode, ObjectType, Repository, Tree, TreeEntry};
use pastproof::error::{Error, ErrorKind, Result};
use pastproof::quantity::Digest;

use self::changes::Disk;
use self::patch::{Patch, Side};

/// How many changed files a message names.
const NAMED: usize = 5;

/// What was found around a plan.
#[derive(Debug)]
pub enum Found {
    /// No repository.
    Nowhere,
    /// A repository that could not be read.
    Unreadable(Unreadable),
    /// A repository and its state.
    Checkout(Checkout),
}

/// Why a repository could not be read.
#[derive(Debug)]
pub struct Unreadable {
    /// The reason, free of names and paths, fit for a record.
    pub reason: &'static str,
    /// What git or the system said; it may name paths and is for the terminal alone.
    pub message: String,
}

/// The state of a repository.
#[derive(Debug)]
pub struct Checkout {
    /// The commit that is checked out, in hexadecimal digits; none before the first.
    pub commit: Option<String>,
    /// The address of the remote `origin` without credentials; none if it is local.
    pub origin: Option<String>,
    /// How the work tree and the index differ from the commit; none if they do not.
    pub difference: Option<Difference>,
}

/// How a work tree differs from its commit.
#[derive(Debug)]
pub struct Difference {
    /// The SHA-256 of the patch. A change that is only staged, and undone on the disk, leaves the
    /// patch empty.
    pub digest: Digest,
    /// The names of the changed files, quoted as git does where they are not plain.
    pub names: Vec<String>,
    patch: Option<Vec<u8>>,
    omitted: Option<String>,
}

impl Checkout {
    /// Whether work tree and index hold the commit and ignored files, nothing else.
    pub fn is_clean(&self) -> bool {
        self.difference.is_none()
    }

    /// The patch from the commit to the work tree, empty if they are equal.
    ///
    /// # Errors
    /// [`ErrorKind::TooLarge`] if it is longer than 64 MiB, [`ErrorKind::Conflict`] if it cannot
    /// hold all that differs.
    pub fn patch(&self) -> Result<&[u8]> {
        let Some(difference) = &self.difference else {
            return Ok(&[]);
        };
        if let Some(omitted) = &difference.omitted {
            return Err(Error::conflict(format!(
                "the difference to the commit cannot be stored: {omitted}; commit it there, or have it ignored"
            )));
        }
        difference.patch.as_deref().ok_or_else(|| {
            Error::too_large(
                "the difference to the commit in the repository around the plan",
                "a longer patch",
                format!("{} MiB", patch::LIMIT >> 20),
            )
        })
    }
}

impl Found {
    /// The checkout, if it is one, has a commit and is clean.
    ///
    /// # Errors
    /// [`ErrorKind::NotClean`] otherwise, with the names of at most five changed files.
    pub fn require_clean(&self) -> Result<&Checkout> {
        let what = match self {
            Self::Nowhere => "a clean checkout is required, found no git repository around the plan".to_string(),
            Self::Unreadable(trouble) => format!("a clean checkout is required, found {}", trouble.sentence()),
            Self::Checkout(Checkout { commit: None, .. }) => {
                "a clean checkout is required, found a git repository without a commit".to_string()
            }
            Self::Checkout(checkout) => match &checkout.difference {
                None => return Ok(checkout),
                Some(difference) => format!(
                    "a clean checkout is required, found changes in {}",
                    difference.summary()
                ),
            },
        };
        Err(ErrorKind::NotClean { what }.into())
    }

    /// The checkout, whose patch can then be asked for.
    ///
    /// # Errors
    /// [`ErrorKind::Conflict`] if there is none or it cannot be read.
    pub fn require_checkout(&self) -> Result<&Checkout> {
        match self {
            Self::Nowhere => Err(Error::conflict(
                "the source cannot be stored: found no git repository around the plan",
            )),
            Self::Unreadable(trouble) => Err(Error::conflict(format!(
                "the source cannot be stored: found {}",
                trouble.sentence()
            ))),
            Self::Checkout(checkout) => Ok(checkout),
        }
    }
}

impl Difference {
    fn summary(&self) -> String {
        let mut text = self.names.iter().take(NAMED).cloned().collect::<Vec<_>>().join(", ");
        if let Some(more @ 1..) = self.names.len().checked_sub(NAMED) {
            text += &format!(" and {more} more");
        }
        text
    }
}

impl Unreadable {
    fn new(reason: &'static str, message: impl ToString) -> Self {
        let message = message.to_string();
        Self { reason, message }
    }

    fn sentence(&self) -> String {
        format!(
            "a git repository that cannot be read: {} ({})",
            self.reason, self.message
        )
    }
}

impl From<git2::Error> for Unreadable {
    fn from(error: git2::Error) -> Self {
        let reason = match error.code() {
            ErrorCode::Owner => "it belongs to another user, see safe.directory in the manual of git config",
            _ => "git could not read a part of it",
        };
        Self::new(reason, error.message())
    }
}

/// Looks for a repository from `plan`, a file or a folder, upward.
///
/// The real place of the plan counts, not that of a symbolic link to it.
pub fn find(plan: &Path) -> Found {
    found(plan, patch::LIMIT).unwrap_or_else(Found::Unreadable)
}

fn found(plan: &Path, limit: u64) -> std::result::Result<Found, Unreadable> {
    let place = fs::canonicalize(plan).map_err(|refusal| Unreadable::new("the plan's folder is not known", refusal))?;
    let folder = if place.is_dir() {
        place.as_path()
    } else {
        place.parent().unwrap_or(&place)
    };
    let repository = match Repository::discover(folder) {
        Ok(repository) => repository,
        Err(absent) if absent.code() == ErrorCode::NotFound => {
            // a work tree or submodule whose repository has gone is not the same as none
            return match folder.ancestors().any(|above| above.join(".git").is_file()) {
                true => Err(Unreadable::new("its .git file leads nowhere", absent.message())),
                false => Ok(Found::Nowhere),
            };
        }
        Err(refusal) => return Err(refusal.into()),
    };
    let Some(top) = repository.workdir().map(Path::to_path_buf) else {
        return Err(Unreadable::new("it has no work tree", "a bare repository"));
    };
    let head = match repository.head() {
        Ok(head) => Some(head.peel_to_commit()?),
        Err(unborn) if unborn.code() == ErrorCode::UnbornBranch => None,
        Err(refusal) => return Err(refusal.into()),
    };
    let tree = head.as_ref().map(git2::Commit::tree).transpose()?;
    let config = repository.config()?.snapshot()?;
    Ok(Found::Checkout(Checkout {
        commit: head.map(|commit| commit.id().to_string()),
        // read as it is written: a rewritten address (insteadOf) is the author's own business
        origin: config
            .get_str("remote.origin.url")
            .ok()
            .and_then(address::without_credentials),
        difference: difference(&repository, &top, tree.as_ref(), limit)?,
    }))
}

fn difference(
    repository: &Repository,
    top: &Path,
    tree: Option<&Tree<'_>>,
    limit: u64,
) -> std::result::Result<Option<Difference>, Unreadable> {
    let submodules = changes::submodules(repository)?;
    let mut changed = changes::files(repository, top)?;
    changed.extend(submodules.iter().map(|path| (path.clone(), Disk::Present)));
    if changed.is_empty() {
        return Ok(None);
    }
    let config = repository.config()?.snapshot()?;
    let keeps = |key| config.get_bool(key).unwrap_or(true);
    let (keeps_modes, keeps_links) = (keeps("core.filemode"), keeps("core.symlinks"));
    let mut patch = Patch::new(limit);
    let mut omitted = None;
    for (path, disk) in &changed {
        let at = top.join(to_path(path)?);
        let entry = tree.map_or(Ok(None), |tree| committed(tree, path))?;
        let limit = patch.file_limit();
        let old = entry.as_ref().map(|entry| Side::committed(repository, entry, limit));
        let new = match disk {
            Disk::Absent => None,
            Disk::Present => match inner(&at) {
                Some(inner) => {
                    let (side, whole) = at_its_commit(repository, path, &inner)?;
                    if !whole {
                        omitted.get_or_insert(format!("{} is a repository of its own", patch::quoted(path)));
                    }
                    Some(side)
                }
                None => {
                    let mode = entry.as_ref().map(patch::mode_of);
                    let kept = mode.filter(|mode| match mode & patch::KIND {
                        patch::FILE => !keeps_modes,
                        patch::LINK => !keeps_links,
                        _ => false,
                    });
                    Side::on_disk(&at, limit, kept)
                        .map_err(|refusal| Unreadable::new("a changed file could not be read", refusal))?
                }
            },
        };
        patch.file(path, old.transpose()?.as_ref(), new.as_ref())?;
    }
    let (digest, patch) = patch.finish();
    Ok(Some(Difference {
        digest,
        names: changed.keys().map(|path| patch::quoted(path)).collect(),
        patch,
        omitted,
    }))
}

/// The entry of a file in the commit.
fn committed(tree: &Tree<'_>, path: &[u8]) -> std::result::Result<Option<TreeEntry<'static>>, git2::Error> {
    match tree.get_path(&to_path(path)?) {
        // a folder that became a file: its files are listed one by one
        Ok(entry) => Ok(Some(entry).filter(|entry| entry.kind() != Some(ObjectType::Tree))),
        Err(absent) if absent.code() == ErrorCode::NotFound => Ok(None),
        Err(refusal) => Err(refusal),
    }
}

/// The repository whose top is the folder `at`.
fn inner(at: &Path) -> Option<Repository> {
    let is_folder = fs::symlink_metadata(at).is_ok_and(|found| found.is_dir());
    is_folder.then(|| Repository::open(at).ok()).flatten()
}

/// A repository within the work tree, and whether its commit says all about it that git keeps.
fn at_its_commit(
    repository: &Repository,
    path: &[u8],
    inner: &Repository,
) -> std::result::Result<(Side, bool), git2::Error> {
    let commit = inner.head().and_then(|head| head.peel_to_commit());
    let known = changes::is_submodule(repository, path);
    let differs = known && changes::within_submodule(repository, path)?;
    let whole = known && !differs && commit.is_ok();
    let commit = commit.map_or_else(|_| "0".repeat(40), |commit| commit.id().to_string());
    Ok((Side::submodule(commit, differs), whole))
}

#[cfg(unix)]
fn to_path(bytes: &[u8]) -> std::result::Result<PathBuf, git2::Error> {
    use std::os::unix::ffi::OsStrExt as _;
    Ok(PathBuf::from(std::ffi::OsStr::from_bytes(bytes)))
}

#[cfg(not(unix))]
fn to_path(bytes: &[u8]) -> std::result::Result<PathBuf, git2::Error> {
    let text = std::str::from_utf8(bytes).map_err(|_| git2::Error::from_str("a name that is not UTF-8"))?;
    Ok(PathBuf::from(text))
}
