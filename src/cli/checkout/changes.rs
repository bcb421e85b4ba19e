//! Which files of a work tree are not as its commit has them.
//!
//! Apart, because this alone is left to git: what is ignored, what a time stamp proves, what a line
//! end is. Its switches that hide a change are not heeded, and nothing is written to the repository.

use std::collections::{BTreeMap, BTreeSet};
use std::fs;
use std::path::Path;

use git2::{IndexEntryExtendedFlag, IndexEntryFlag, Repository, Status, StatusOptions};
use git2::{SubmoduleIgnore, SubmoduleStatus};

use super::{Unreadable, to_path};

/// Whether git still sees a changed file on the disk.
#[derive(Clone, Copy, PartialEq, Eq)]
pub enum Disk {
    /// A file, a link or a repository.
    Present,
    /// Nothing, or nothing that git would look at.
    Absent,
}

/// Files whose index entry or state on the disk is not that of the commit, untracked ones included.
pub fn files(repository: &Repository, top: &Path) -> std::result::Result<BTreeMap<Vec<u8>, Disk>, Unreadable> {
    let left_out = unhide(repository, top)?;
    let mut options = StatusOptions::new();
    options
        .include_untracked(true)
        .recurse_untracked_dirs(true)
        .include_ignored(false);
    // not read again, in case another git writes it now: what is hidden would be hidden again
    options.include_unreadable(true).update_index(false).no_refresh(true);
    let statuses = repository.statuses(Some(&mut options))?;
    let changed = statuses
        .iter()
        .filter(|entry| match entry.status() {
            Status::CURRENT => false,
            Status::WT_DELETED => !left_out.contains(entry.path_bytes()),
            _ => true,
        })
        .map(|entry| {
            let status = entry.status();
            let gone = status.contains(Status::WT_DELETED)
                || (status.contains(Status::INDEX_DELETED) && !status.contains(Status::WT_NEW));
            let path = entry.path_bytes();
            // a repository within the repository comes with a slash
            let path = path.strip_suffix(b"/").unwrap_or(path).to_vec();
            (path, if gone { Disk::Absent } else { Disk::Present })
        });
    Ok(changed.collect())
}

/// Makes git look at files it was told to take as unchanged, in memory alone. Tells the files that
/// a sparse checkout leaves out and that are indeed not on the disk.
fn unhide(repository: &Repository, top: &Path) -> std::result::Result<BTreeSet<Vec<u8>>, Unreadable> {
    let mut left_out = BTreeSet::new();
    let mut index = repository.index()?;
    index.read(true)?;
    let taken = IndexEntryFlag::VALID.bits();
    let skipped = IndexEntryExtendedFlag::SKIP_WORKTREE.bits();
    let hidden = index
        .iter()
        .filter(|entry| (entry.flags & taken) != 0 || (entry.flags_extended & skipped) != 0);
    for mut entry in hidden.collect::<Vec<_>>() {
        if fs::symlink_metadata(top.join(to_path(&entry.path)?)).is_err() && (entry.flags & taken) == 0 {
            left_out.insert(entry.path);
            continue;
        }
        entry.flags &= !taken;
        entry.flags_extended &= !skipped;
        index.add(&entry)?;
    }
    Ok(left_out)
}

/// Submodules that are not as the commit has them, whatever the author's settings let git ignore.
pub fn submodules(repository: &Repository) -> std::result::Result<BTreeSet<Vec<u8>>, Unreadable> {
    let mut changed = BTreeSet::new();
    for submodule in repository.submodules()? {
        let name = String::from_utf8_lossy(submodule.name_bytes()).into_owned();
        let status = repository.submodule_status(&name, SubmoduleIgnore::None)?;
        let unchanged = SubmoduleStatus::IN_HEAD
            | SubmoduleStatus::IN_INDEX
            | SubmoduleStatus::IN_CONFIG
            | SubmoduleStatus::IN_WD
            | SubmoduleStatus::WD_UNINITIALIZED;
        if !unchanged.contains(status) {
            changed.insert(submodule.path().to_string_lossy().into_owned().into_bytes());
        }
    }
    Ok(changed)
}

/// Whether a submodule differs from the commit it is at.
pub fn within_submodule(repository: &Repository, path: &[u8]) -> std::result::Result<bool, git2::Error> {
    let status = repository.submodule_status(&String::from_utf8_lossy(path), SubmoduleIgnore::None)?;
    let own = SubmoduleStatus::WD_INDEX_MODIFIED | SubmoduleStatus::WD_WD_MODIFIED | SubmoduleStatus::WD_UNTRACKED;
    Ok(status.intersects(own))
}

/// Whether git keeps the commit of the repository at `path`.
pub fn is_submodule(repository: &Repository, path: &[u8]) -> bool {
    repository.find_submodule(&String::from_utf8_lossy(path)).is_ok()
}
