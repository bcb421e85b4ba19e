//! Our patches compared with git's own, and applied by git.

use super::*;

/// Every file and link of a folder with its executable bit and bytes, `.git` apart.
fn contents(folder: &Path) -> BTreeMap<PathBuf, (u32, Vec<u8>)> {
    let mut found = BTreeMap::new();
    let mut folders = vec![folder.to_path_buf()];
    while let Some(next) = folders.pop() {
        for entry in fs::read_dir(next).unwrap().map(|entry| entry.unwrap().path()) {
            let kind = fs::symlink_metadata(&entry).unwrap();
            let name = entry.strip_prefix(folder).unwrap().to_path_buf();
            if entry.ends_with(".git") {
            } else if kind.is_symlink() {
                found.insert(
                    name,
                    (0, fs::read_link(&entry).unwrap().into_os_string().into_encoded_bytes()),
                );
            } else if kind.is_dir() {
                folders.push(entry);
            } else {
                found.insert(name, (kind.permissions().mode() & 0o100, fs::read(&entry).unwrap()));
            }
        }
    }
    found
}

/// Applies our patch to a fresh checkout of the commit and expects the same files, bit for bit.
fn assert_git_restores(folder: &Folder) {
    let ours = folder.checkout();
    let patch = ours.patch().unwrap();
    assert_eq!(ours.difference.as_ref().unwrap().digest, Digest::of(patch));
    let fresh = Folder::new();
    fresh.git(&["clone", "-q", folder.path().to_str().unwrap(), "copy"]);
    fresh.write("patch", patch);
    let copy = fresh.path().join("copy");
    if !patch.is_empty() {
        git(&copy, &["apply", "--whitespace=nowarn", "../patch"]);
    }
    assert_eq!(
        contents(&copy),
        contents(folder.path()),
        "{}",
        String::from_utf8_lossy(patch)
    );
}

#[test]
fn each_kind_of_change_is_seen_and_named() {
    type Change = fn(&Folder);
    let changes: [(&str, Change); 7] = [
        ("film/notes.txt", |folder| folder.write("film/notes.txt", b"changed")),
        ("film/notes.txt", |folder| {
            fs::remove_file(folder.path().join("film/notes.txt")).unwrap()
        }),
        ("new/a b", |folder| folder.write("new/a b", b"untracked")),
        ("staged", |folder| {
            folder.write("staged", b"");
            folder.git(&["add", "staged"]);
        }),
        // staged, then undone on the disk: no patch, yet not clean
        ("plan.toml", |folder| {
            folder.write("plan.toml", b"staged\n");
            folder.git(&["add", "plan.toml"]);
            folder.write("plan.toml", b"[lattice]\nsize = 64\n");
        }),
        ("film/notes.txt", |folder| {
            folder.git(&["rm", "-q", "--cached", "film/notes.txt"]);
        }),
        ("plan.toml", |folder| {
            let path = folder.path().join("plan.toml");
            fs::set_permissions(path, fs::Permissions::from_mode(0o755)).unwrap();
        }),
    ];
    for (index, (name, change)) in changes.into_iter().enumerate() {
        let folder = Folder::repository();
        change(&folder);
        let found = folder.find();
        let message = found.require_clean().unwrap_err().to_string();
        assert_eq!(
            message,
            format!("a clean checkout is required, found changes in {name} [request.not-clean]"),
            "{index}"
        );
        assert_git_restores(&folder);
    }
}

/// Expected: the format that git itself writes, by its manual of `git diff`, section "GENERATING
/// PATCH TEXT WITH -P", and here compared with its output.
#[test]
fn a_patch_is_that_of_git_whatever_its_settings() {
    let folder = Folder::repository();
    folder.write("film/notes.txt", b"one\nTWO\nthree\nfour\nfive\nsix\nseven\neight");
    folder.write("plan.toml", b"");
    folder.git(&["add", "plan.toml"]);
    let theirs = folder.git(&["diff", "HEAD", "--full-index", "--no-ext-diff"]);
    let ours = folder.patch();
    assert_eq!(ours.trim_end(), theirs);
    for setting in [
        "diff.noprefix true",
        "diff.mnemonicPrefix true",
        "core.quotePath false",
        "diff.context 0",
        "diff.algorithm patience",
        "color.ui always",
        "core.abbrev 7",
        "status.showUntrackedFiles no",
        "diff.ignoreSubmodules all",
        "diff.renames copies",
        "diff.external false",
    ] {
        let (key, value) = setting.split_once(' ').unwrap();
        folder.git(&["config", key, value]);
    }
    folder.write(".git/info/attributes", b"*.txt -diff\n");
    assert_eq!(folder.patch(), ours);
}

#[test]
fn git_restores_the_work_tree_from_the_patch() {
    let folder = Folder::repository();
    let noise: Vec<u8> = (0..5000_u32)
        .map(|index| (index.wrapping_mul(2_654_435_761) >> 24) as u8)
        .collect();
    folder.write("binary", &noise);
    folder.write("binary-gone", &noise[..900]);
    folder.write("empty-gone", b"");
    folder.write("becomes-link", b"text\n");
    folder.write("becomes-folder", b"text\n");
    folder.write("folder/becomes-file", b"text\n");
    folder.write("dos", b"one\r\ntwo\r\n");
    folder.write("no-end", b"one");
    symlink("plan.toml", folder.path().join("link")).unwrap();
    symlink("plan.toml", folder.path().join("becomes-text")).unwrap();
    folder.commit();

    folder.write("binary", &[&noise[..2500], b"\0new", &noise[2400..]].concat());
    folder.write("binary-new", &noise[100..]);
    folder.write("empty-new", b"");
    folder.write("script", b"#!/bin/sh\n");
    // the owner's bit counts, the others' does not
    folder.write("others", b"#!/bin/sh\n");
    for (name, mode) in [("script", 0o744), ("others", 0o645)] {
        fs::set_permissions(folder.path().join(name), fs::Permissions::from_mode(mode)).unwrap();
    }
    folder.write("dos", b"one\r\nthree\n");
    folder.write("no-end", b"one\ntwo");
    folder.write("a name", b"space\n");
    folder.write("-- \"quoted\"\t\\\n", b"awkward\n");
    folder.write("gr\u{f6}\u{df}e", b"not ASCII\n");
    for name in [
        "binary-gone",
        "empty-gone",
        "becomes-link",
        "becomes-folder",
        "becomes-text",
        "link",
    ] {
        fs::remove_file(folder.path().join(name)).unwrap();
    }
    fs::remove_dir_all(folder.path().join("folder")).unwrap();
    folder.write("folder", b"text\n");
    folder.write("becomes-folder/inner", b"text\n");
    folder.write("becomes-text", b"plan.toml");
    symlink("dos", folder.path().join("becomes-link")).unwrap();
    symlink("/nowhere", folder.path().join("link")).unwrap();
    // staged in another state than on the disk, forced past the ignored files, and added then gone
    folder.write(".git/info/exclude", b"forced\n");
    folder.write("forced", b"forced\n");
    folder.write("plan.toml", b"staged\n");
    folder.write("fleeting", b"");
    folder.git(&["add", "--force", "forced", "plan.toml", "fleeting"]);
    folder.write("plan.toml", b"not staged\n");
    fs::remove_file(folder.path().join("fleeting")).unwrap();
    assert_git_restores(&folder);
    // the same state gives the same bytes, staged or not
    let patch = folder.checkout().patch().unwrap().to_vec();
    folder.git(&["add", "-A"]);
    assert_eq!(folder.checkout().patch().unwrap(), patch);
}

#[test]
fn line_ends_that_git_converts_are_no_change() {
    let folder = Folder::repository();
    folder.git(&["config", "core.autocrlf", "true"]);
    fs::remove_file(folder.path().join("plan.toml")).unwrap();
    folder.git(&["checkout", "--", "plan.toml"]);
    assert_eq!(
        fs::read(folder.path().join("plan.toml")).unwrap(),
        b"[lattice]\r\nsize = 64\r\n"
    );
    assert!(folder.checkout().is_clean());
    // once the file differs, the bytes on the disk count
    folder.write("plan.toml", b"[lattice]\r\nsize = 65\r\n");
    assert!(folder.patch().contains("+[lattice]\r\n+size = 65\r\n"));
}

#[test]
fn a_long_difference_has_a_digest_but_no_patch() {
    let folder = Folder::repository();
    let digest = |limit| {
        checkout(found(folder.path(), limit).unwrap())
            .difference
            .unwrap()
            .digest
    };
    let patch = |limit| {
        checkout(found(folder.path(), limit).unwrap())
            .patch()
            .map(<[u8]>::to_vec)
    };
    folder.write("a", &b"line\n".repeat(100));
    folder.write("z", b"short\n");
    let whole = patch(patch::LIMIT).unwrap();
    let length = whole.len() as u64;
    assert_eq!(patch(length).unwrap(), whole);
    // too long by one byte, by a file, and before the last file
    for limit in [length - 1, 400, 0] {
        assert_eq!(patch(limit).unwrap_err().code(), "request.too-large", "{limit}");
    }
    // the first is too long, and from there on lengths and digests stand in for contents
    let mut stands_in = String::new();
    for (name, bytes) in [("a", b"line\n".repeat(100)), ("z", b"short\n".to_vec())] {
        let (length, digest) = (bytes.len(), Digest::of(&bytes));
        stands_in += &format!("diff --git a/{name} b/{name}\nnew file mode 100644\n");
        stands_in += &format!("content left out: nothing to {length} bytes, SHA-256 {digest}\n");
    }
    assert_eq!(digest(400), Digest::of(stands_in.as_bytes()));
    let before = [digest(length - 1), digest(400)];
    folder.write("z", b"shirt\n");
    assert_eq!(before.map(|old| old == digest(400)), [false, false]);
    folder.write("z", b"short\n");
    assert_eq!(digest(400), before[1]);
    // a large committed file that changes or goes
    folder.commit();
    folder.write("a", b"");
    let emptied = digest(400);
    fs::remove_file(folder.path().join("a")).unwrap();
    assert_ne!(digest(400), emptied);
    assert_eq!(patch(400).unwrap_err().code(), "request.too-large");
}
