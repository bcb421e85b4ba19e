//! The Merkle tree over the samples of an ensemble (RFC 9162 §2.1, with SHA-256).
//!
//! One root stands for all samples, and a path of about log2(n) nodes shows that one sample
//! belongs to it without the others. The tree is apart because it knows hashes only: what a leaf
//! holds is said where leaves are made.
//!
//! A leaf is hashed as SHA-256(0x00 || bytes), a node as SHA-256(0x01 || left || right), so that no
//! node can be shown as a leaf. The RFC splits n leaves at the largest power of two below n; this
//! is the same tree as pairing upwards, level by level, with a lone last node promoted unchanged.
//!
//! # Stored form
//!
//! All levels one after the other, the leaf hashes (level 0) first and the root last, 32 bytes a
//! node. Level k of a tree of n leaves has ceil(n / 2^k) nodes; a promoted node is repeated in
//! every level it passes. One leaf makes one level; no leaves make an empty file. Any node is found
//! by arithmetic ([`node_offset`]), so a reader fetches a path by its byte ranges.

use std::io;

use crate::quantity::Digest;
use crate::quantity::Hasher;

/// Bytes of a stored node.
pub const NODE_BYTES: u64 = 32;

/// The place of a node in the tree.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Debug)]
pub struct Node {
    /// The level, 0 for leaf hashes.
    pub level: u32,
    /// The place in its level, from 0.
    pub position: u64,
}

/// The hash of a leaf.
pub fn leaf_hash(leaf: &[u8]) -> Digest {
    let mut hasher = Hasher::default();
    hasher.update(&[0]);
    hasher.update(leaf);
    hasher.finish()
}

fn node_hash(left: &Digest, right: &Digest) -> Digest {
    let mut hasher = Hasher::default();
    hasher.update(&[1]);
    hasher.update(&left.0);
    hasher.update(&right.0);
    hasher.finish()
}

/// A tree with all its nodes.
#[derive(Clone, Debug)]
pub struct Tree {
    /// Level 0 first; empty for no leaves, else the last level is the root alone.
    levels: Vec<Vec<Digest>>,
}

impl Tree {
    /// The tree over leaves that are hashed already (see [`leaf_hash`]).
    pub fn from_leaf_hashes(leaf_hashes: Vec<Digest>) -> Self {
        let mut levels = Vec::new();
        let mut level = leaf_hashes;
        while level.len() > 1 {
            let above = level
                .chunks(2)
                .map(|pair| match pair {
                    [left, right] => node_hash(left, right),
                    lone => lone[0],
                })
                .collect();
            levels.push(std::mem::replace(&mut level, above));
        }
        if !level.is_empty() {
            levels.push(level);
        }
        Self { levels }
    }

    /// The number of leaves.
    pub fn size(&self) -> u64 {
        self.levels.first().map_or(0, |leaves| leaves.len() as u64)
    }

    /// The root; for no leaves the SHA-256 of nothing.
    pub fn root(&self) -> Digest {
        self.levels.last().map_or_else(|| Digest::of(&[]), |top| top[0])
    }

    /// The inclusion path of a leaf (RFC 9162 §2.1.3.1), lowest node first; `None` if there is no
    /// such leaf.
    pub fn inclusion(&self, index: u64) -> Option<Vec<Digest>> {
        let nodes = inclusion_nodes(self.size(), index)?;
        Some(
            nodes
                .iter()
                .map(|node| self.levels[node.level as usize][node.position as usize])
                .collect(),
        )
    }

    /// All nodes in the order of the stored form.
    pub fn nodes(&self) -> impl Iterator<Item = &Digest> {
        self.levels.iter().flatten()
    }

    /// Writes the stored form.
    ///
    /// # Errors
    /// Whatever `sink` refuses.
    pub fn write(&self, sink: &mut impl io::Write) -> io::Result<()> {
        self.nodes().try_for_each(|node| sink.write_all(&node.0))
    }
}

/// Whether `path` leads from the leaf hash at `index` to the root of a tree of `size` leaves (RFC 9162 §2.1.3.2).
pub fn verify_inclusion(leaf_hash: Digest, index: u64, size: u64, path: &[Digest], root: Digest) -> bool {
    if index >= size {
        return false;
    }
    // the names fn and sn of the RFC: the node on the way up and the last node of its level
    let (mut node, mut last) = (index, size - 1);
    let mut hash = leaf_hash;
    for sibling in path {
        if last == 0 {
            return false;
        }
        if node & 1 == 1 || node == last {
            hash = node_hash(sibling, &hash);
            while node & 1 == 0 && node != 0 {
                node >>= 1;
                last >>= 1;
            }
        } else {
            hash = node_hash(&hash, sibling);
        }
        node >>= 1;
        last >>= 1;
    }
    last == 0 && hash == root
}

/// The number of nodes in each level of a tree of `size` leaves.
fn level_lengths(size: u64) -> impl Iterator<Item = u64> {
    let first = (size > 0).then_some(size);
    std::iter::successors(first, |&length| (length > 1).then(|| length.div_ceil(2)))
}

/// The length of the stored form in bytes; `None` if it is beyond 64 bits.
pub fn stored_len(size: u64) -> Option<u64> {
    level_lengths(size)
        .try_fold(0_u64, |sum, length| sum.checked_add(length))?
        .checked_mul(NODE_BYTES)
}

/// Where a node begins in the stored form of a tree of `size` leaves; `None` if there is no such node.
pub fn node_offset(size: u64, node: Node) -> Option<u64> {
    let mut before = 0_u64;
    for (level, length) in (0..).zip(level_lengths(size)) {
        if level == node.level {
            return (node.position < length)
                .then(|| before.checked_add(node.position)?.checked_mul(NODE_BYTES))
                .flatten();
        }
        before = before.checked_add(length)?;
    }
    None
}

/// The nodes of the inclusion path of a leaf, lowest first; `None` if there is no such leaf.
pub fn inclusion_nodes(size: u64, index: u64) -> Option<Vec<Node>> {
    if index >= size {
        return None;
    }
    let siblings = (0..).zip(level_lengths(size)).filter_map(|(level, length)| {
        let position = index.checked_shr(level).unwrap_or(0) ^ 1;
        // a lone last node is promoted and meets no sibling
        (position < length).then_some(Node { level, position })
    });
    Some(siblings.collect())
}

#[cfg(test)]
mod tests {
    use super::*;

    fn hex(text: &str) -> Vec<u8> {
        (0..text.len() / 2)
            .map(|at| u8::from_str_radix(&text[2 * at..2 * at + 2], 16).unwrap())
            .collect()
    }

    fn digest(text: &str) -> Digest {
        Digest::parse(text).unwrap()
    }

    // Source: RFC 6962 §2.1; leaves, roots and the path of leaf 5 of 8 are the published constants of the
    // certificate-transparency Merkle tree tests (transparency-dev/merkle, testonly), recomputed independently.
    const LEAVES: [&str; 8] = [
        "",
        "00",
        "10",
        "2021",
        "3031",
        "40414243",
        "5051525354555657",
        "606162636465666768696a6b6c6d6e6f",
    ];
    const ROOTS: [&str; 9] = [
        "e3b0c44298fc1c149afbf4c8996fb92427ae41e4649b934ca495991b7852b855",
        "6e340b9cffb37a989ca544e6bb780a2c78901d3fb33738768511a30617afa01d",
        "fac54203e7cc696cf0dfcb42c92a1d9dbaf70ad9e621f4bd8d98662f00e3c125",
        "aeb6bcfe274b70a14fb067a5e5578264db0fa9b51af5e0ba159158f329e06e77",
        "d37ee418976dd95753c1c73862b9398fa2a2cf9b4ff0fdfe8b30cd95209614b7",
        "4e3bbb1f7b478dcfe71fb631631519a3bca12c9aefca1612bfce4c13a86264d4",
        "76e67dadbcdf1e10e1b74ddc608abd2f98dfb16fbce75277b5232a127f2087ef",
        "ddb89be403809e325750d3d263cd78929c2942b7942a34b77e122c9594a74c8c",
        "5dc9da79a70659a9ad559cb701ded9a2ab9d823aad2f4960cfe370eff4604328",
    ];
    const PATH_OF_LEAF_5_OF_8: [&str; 3] = [
        "bc1a0643b12e4d2d7c77918f44e0f4f79a838b6cf9ec5b5c283e1f4d88599e6b",
        "ca854ea128ed050b41b35ffc1b87b8eb2bde461e9e3b5596ece6b9d5975a0ae0",
        "d37ee418976dd95753c1c73862b9398fa2a2cf9b4ff0fdfe8b30cd95209614b7",
    ];

    fn published(size: usize) -> Tree {
        Tree::from_leaf_hashes(LEAVES[..size].iter().map(|leaf| leaf_hash(&hex(leaf))).collect())
    }

    fn numbered(size: u64) -> Vec<Vec<u8>> {
        (0..size).map(|index| index.to_le_bytes().to_vec()).collect()
    }

    fn tree_of(leaves: &[Vec<u8>]) -> Tree {
        Tree::from_leaf_hashes(leaves.iter().map(|leaf| leaf_hash(leaf)).collect())
    }

    /// MTH of RFC 9162 §2.1.1, word by word.
    fn root_by_definition(leaves: &[Vec<u8>]) -> Digest {
        match leaves {
            [] => Digest::of(&[]),
            [leaf] => Digest::of(&[&[0][..], leaf].concat()),
            _ => {
                let (left, right) = leaves.split_at(split(leaves.len()));
                Digest::of(&[&[1][..], &root_by_definition(left).0, &root_by_definition(right).0].concat())
            }
        }
    }

    /// PATH of RFC 9162 §2.1.3.1, word by word.
    fn path_by_definition(index: usize, leaves: &[Vec<u8>]) -> Vec<Digest> {
        if leaves.len() == 1 {
            return Vec::new();
        }
        let at = split(leaves.len());
        let (left, right) = leaves.split_at(at);
        let (mut path, other) = if index < at {
            (path_by_definition(index, left), root_by_definition(right))
        } else {
            (path_by_definition(index - at, right), root_by_definition(left))
        };
        path.push(other);
        path
    }

    /// The largest power of two below `n`.
    fn split(n: usize) -> usize {
        (0..).map(|k| 1 << k).take_while(|&k| k < n).last().unwrap()
    }

    #[test]
    fn published_roots_and_path() {
        for (size, root) in ROOTS.iter().enumerate() {
            assert_eq!(published(size).root(), digest(root), "{size} leaves");
        }
        let path: Vec<_> = PATH_OF_LEAF_5_OF_8.iter().map(|node| digest(node)).collect();
        assert_eq!(published(8).inclusion(5).unwrap(), path);
    }

    #[test]
    fn tree_paths_and_stored_form_follow_the_definition() {
        for size in 1..=70_u64 {
            let leaves = numbered(size);
            let tree = tree_of(&leaves);
            let root = root_by_definition(&leaves);
            assert_eq!(tree.root(), root, "{size} leaves");
            let mut stored = Vec::new();
            tree.write(&mut stored).unwrap();
            assert_eq!(stored_len(size), Some(stored.len() as u64));
            for index in 0..size {
                let path = tree.inclusion(index).unwrap();
                assert_eq!(
                    path,
                    path_by_definition(index as usize, &leaves),
                    "leaf {index} of {size}"
                );
                let leaf = leaf_hash(&leaves[index as usize]);
                assert!(verify_inclusion(leaf, index, size, &path, root));
                let fetched: Vec<_> = inclusion_nodes(size, index)
                    .unwrap()
                    .into_iter()
                    .map(|node| {
                        let offset = node_offset(size, node).unwrap() as usize;
                        Digest(stored[offset..offset + 32].try_into().unwrap())
                    })
                    .collect();
                assert_eq!(fetched, path);
            }
        }
    }

    #[test]
    fn stored_form_of_none_one_and_three() {
        let stored = |size| {
            let mut bytes = Vec::new();
            tree_of(&numbered(size)).write(&mut bytes).unwrap();
            bytes
        };
        assert!(stored(0).is_empty());
        assert_eq!(stored(1), leaf_hash(&0_u64.to_le_bytes()).0);
        // levels of 3, 2 and 1 nodes; the third leaf is promoted to place 4
        let three = stored(3);
        assert_eq!(three.len(), 6 * 32);
        assert_eq!(three[64..96], three[128..160]);
        let node = |level, position| Node { level, position };
        assert_eq!(node_offset(3, node(1, 1)), Some(128));
        assert_eq!(node_offset(3, node(2, 0)), Some(160));
        assert_eq!(node_offset(3, node(1, 2)), None);
        assert_eq!(node_offset(3, node(3, 0)), None);
        assert_eq!(node_offset(0, node(0, 0)), None);
    }

    #[test]
    fn a_path_binds_leaf_place_size_and_root() {
        let size = 11;
        let leaves = numbered(size);
        let tree = tree_of(&leaves);
        let root = tree.root();
        for index in 0..size {
            let leaf = leaf_hash(&leaves[index as usize]);
            let path = tree.inclusion(index).unwrap();
            for other in (0..2 * size).filter(|&other| other != index) {
                assert!(
                    !verify_inclusion(leaf, other, size, &path, root),
                    "{index} shown as {other}"
                );
            }
            for at in 0..path.len() {
                let mut changed = path.clone();
                changed[at].0[31] ^= 1;
                assert!(!verify_inclusion(leaf, index, size, &changed, root));
            }
            assert!(!verify_inclusion(leaf, index, size, &path[1..], root));
            assert!(!verify_inclusion(
                leaf,
                index,
                size,
                &[path.clone(), vec![root]].concat(),
                root
            ));
            assert!(!verify_inclusion(leaf_hash(b"another"), index, size, &path, root));
            assert!(!verify_inclusion(leaf, index, size, &path, leaf));
        }
        assert!(!verify_inclusion(root, 0, 0, &[], root));
    }

    #[test]
    fn a_node_is_no_leaf_and_swapped_leaves_show() {
        let leaves = numbered(4);
        let tree = tree_of(&leaves);
        // the second level shown as a tree of two leaves whose bytes are the hashed pairs
        let pair = |at: usize| [leaf_hash(&leaves[at]).0, leaf_hash(&leaves[at + 1]).0].concat();
        assert_ne!(tree_of(&[pair(0), pair(2)]).root(), tree.root());
        let mut swapped = leaves.clone();
        swapped.swap(1, 2);
        assert_ne!(tree_of(&swapped).root(), tree.root());
    }

    #[test]
    fn sizes_of_a_stranger_are_total() {
        assert_eq!(stored_len(0), Some(0));
        assert_eq!(stored_len(u64::MAX), None);
        assert_eq!(inclusion_nodes(0, 0), None);
        assert_eq!(inclusion_nodes(5, 5), None);
        // the last of 2^64 - 1 leaves has an even index, so it is promoted once and then meets 63 siblings
        assert_eq!(inclusion_nodes(u64::MAX, u64::MAX - 1).map(|path| path.len()), Some(63));
        let node = Node {
            level: 0,
            position: u64::MAX - 1,
        };
        assert_eq!(node_offset(u64::MAX, node), None);
        assert!(!verify_inclusion(
            Digest([0; 32]),
            u64::MAX - 1,
            u64::MAX,
            &[],
            Digest([0; 32])
        ));
    }
}
