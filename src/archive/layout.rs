//! The members of an archive: their names and their order (`schema/ARCHIVE.md`).

use crate::quantity::EnsembleIndex;

/// What a reader needs without this program.
pub const README: &str = "README.txt";
/// The plan as the author wrote it.
pub const PLAN: &str = "plan.toml";
/// The definition of the stream.
pub const STREAM: &str = "STREAM.md";
/// The science; its SHA-256 is the root.
pub const RECORD: &str = "record.json";
/// Program and author's checkout.
pub const PROVENANCE: &str = "provenance.json";
/// The author's difference to the recorded commit.
pub const PATCH: &str = "difference.patch";
/// Times and machine.
pub const CIRCUMSTANCES: &str = "circumstances.json";
/// The digests of all members above it; its SHA-256 is the seal.
pub const MANIFEST: &str = "MANIFEST.sha256";
/// What was added after the seal.
pub const ATTEST: &str = "attest/";

/// Thresholds, in an ensemble's folder.
pub const MAP: &str = "map.json";
/// Edges of a graph, in an ensemble's folder.
pub const GRAPH: &str = "graph.json";
/// Site labels of a graph, in an ensemble's folder.
pub const SITES: &str = "sites.csv";
/// Held sites, in an ensemble's folder.
pub const HELD: &str = "held.json";
/// One line a sample, in an ensemble's folder.
pub const TABLE: &str = "samples.csv";
/// The nodes of the tree over the samples, in an ensemble's folder.
pub const TREE: &str = "tree.bin";

/// A file that the plan names.
pub fn input(name: &str) -> String {
    format!("inputs/{name}")
}

/// A member in an ensemble's folder.
pub fn in_ensemble(ensemble: EnsembleIndex, member: &str) -> String {
    format!("ensembles/{:04}/{member}", ensemble.0)
}

/// A sample member in an ensemble's folder.
pub fn samples(part: usize) -> String {
    format!("samples/{part:04}.npy")
}

/// Whether version 1 of the archive knows a member of that name, in a run of so many ensembles.
pub fn is_known(name: &str, ensembles: usize) -> bool {
    let whole = [README, PLAN, STREAM, RECORD, PROVENANCE, PATCH, CIRCUMSTANCES, MANIFEST];
    if whole.contains(&name) || name.starts_with(ATTEST) || name.starts_with(&input("")) {
        return true;
    }
    let number = |text: &str| {
        text.parse::<usize>()
            .ok()
            .filter(|number| format!("{number:04}") == text)
    };
    let Some((folder, member)) = name.strip_prefix("ensembles/").and_then(|rest| rest.split_once('/')) else {
        return false;
    };
    let part = member
        .strip_prefix("samples/")
        .and_then(|part| part.strip_suffix(".npy"));
    number(folder).is_some_and(|number| number < ensembles)
        && ([MAP, GRAPH, SITES, HELD, TABLE, TREE].contains(&member) || part.and_then(number).is_some())
}

/// `sites.csv`: the label of each site number, quoted as in RFC 4180 where needed.
pub fn sites_text(labels: &[String]) -> String {
    let quoted = |label: &String| {
        if label.contains(['"', ',']) {
            format!("\"{}\"", label.replace('"', "\"\""))
        } else {
            label.clone()
        }
    };
    let lines = labels
        .iter()
        .enumerate()
        .map(|(site, label)| format!("{site},{}\n", quoted(label)));
    std::iter::once("site,label\n".to_string()).chain(lines).collect()
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn what_version_1_does_not_know_is_seen() {
        for name in [
            "README.txt",
            "inputs/a/b.csv",
            "ensembles/0001/samples/0000.npy",
            "ensembles/0000/tree.bin",
            "attest/x",
        ] {
            assert!(is_known(name, 2), "{name}");
        }
        for name in [
            "readme",
            "ensembles/0002/map.json",
            "ensembles/1/map.json",
            "ensembles/0000/samples/0.npy",
            "ensembles/0000/x",
            "attest",
        ] {
            assert!(!is_known(name, 2), "{name}");
        }
    }

    /// RFC 4180, section 2: marks are doubled within marks.
    #[test]
    fn labels_are_quoted_where_they_must_be() {
        let labels = ["tarn", "mere, north", "the \"fell\""].map(str::to_string);
        assert_eq!(
            sites_text(&labels),
            "site,label\n0,tarn\n1,\"mere, north\"\n2,\"the \"\"fell\"\"\"\n"
        );
    }
}
