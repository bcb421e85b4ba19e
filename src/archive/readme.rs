//! `README.txt`: what a reader in twenty years needs to use an archive without this program.

use crate::archive::wire::Record;
use crate::law::{Law, Model};
use crate::plan::SeedRule;
use crate::quantity::Digest;

/// The convention of a law in words: what the parameters multiply and what the bits mean.
pub fn conventions(law: &Law) -> &'static str {
    match law.model() {
        Model::Ising { .. } => {
            "Ising: weight exp(-beta E), E = -sum over edges of J s s' - sum over sites of h s, s = -1 or +1, each \
             edge counted once, beta and J without units; probability of +1 given the neighbours: \
             1/(1 + exp(-2 beta (sum J s' + h))); bit 1 is +1, bit 0 is -1"
        }
        Model::LatticeGas { .. } => {
            "lattice gas with nearest-neighbour exclusion: weight z^(occupied sites), no two neighbours occupied; \
             probability of occupied: z/(1 + z) if no neighbour is, else 0; bit 1 is occupied, bit 0 is empty"
        }
    }
}

/// `text` in lines of at most `width` letters, each after `indent`; a longer word has a line to itself.
pub fn wrapped(text: &str, indent: &str, width: usize) -> String {
    let mut lines: Vec<String> = Vec::new();
    for word in text.split(' ') {
        match lines.last_mut() {
            Some(line) if line.len() + 1 + word.len() <= width => {
                line.push(' ');
                line.push_str(word);
            }
            _ => lines.push(format!("{indent}{word}")),
        }
    }
    lines.join("\n")
}

/// The text of the member.
pub fn text(title: &str, record: &Record, root: Digest, seed_rule: &SeedRule, laws: &[Law]) -> String {
    let mut conventions: Vec<&str> = laws.iter().map(conventions).collect();
    conventions.sort_unstable();
    conventions.dedup();
    let seed = wrapped(&format!("Seed: {seed_rule}."), "", 92);
    let conventions: String = conventions.iter().map(|line| wrapped(line, "  ", 92) + "\n").collect();
    let ensembles = record
        .ensembles
        .iter()
        .zip(laws)
        .enumerate()
        .map(|(number, (ensemble, law))| {
            format!(
                "  {number:04}  {} samples of {}, {}\n",
                ensemble.samples,
                law.word(),
                law.lattice()
            )
        });
    let ensembles: String = ensembles.collect();
    format!(
        "{title}

These are exact samples of lattice or graph models, drawn by coupling from the past
(Propp and Wilson 1996). Every bit of every sample follows from the seed and the laws in
record.json by the definition in STREAM.md, which is complete: no other program is needed.

Root (SHA-256 of record.json):
  {root}
{seed}
The root depends on plan, seed and definition only. The seal is the SHA-256 of
MANIFEST.sha256 and covers every byte of the members listed there.

CHECK IT WITHOUT OUR PROGRAM
  sha256sum -c MANIFEST.sha256
  sha256sum record.json               (the root: compare with what the paper prints)

MEMBERS
  plan.toml, inputs/   what the author asked for, and the files it names
  STREAM.md            the definition of the random maps
  record.json          seed, laws, keys, counts, roots of the trees of samples
  provenance.json      program, revision, author's checkout
  ensembles/NNNN/      one folder an ensemble, numbered from 0:
    map.json           thresholds floor(p 2^128) of the random map
    graph.json         edges by site number, where the lattice is a graph
    sites.csv          the label of each site number of a graph
    held.json          sites whose value was given, where there are any
    samples.csv        one line a sample: index, status, depth, merged_at, row, hash, observables
    tree.bin           all nodes of the tree over the samples, leaves first, 32 bytes each
    samples/NNNN.npy   exact samples, one row each, in the order of the column `row`
  circumstances.json   times, machine, threads: nothing that a sample depends on
  MANIFEST.sha256      SHA-256 of every member above
  attest/              may follow: what was added later; not covered by the seal

READ A SAMPLE (Python with NumPy)
  import numpy as np
  rows = np.load(\"ensembles/0000/samples/0000.npy\")      # uint8, one packed sample a row
  bits = np.unpackbits(rows, axis=1, bitorder=\"little\")  # cut to the number of sites
The sites stand in the order of STREAM.md section 9; record.json gives shape and values.
A sample's hash is the SHA-256 of its packed bytes.

SAMPLES.CSV
  status      exact, or unfinished: the bounds had not met at the depth limit; then the hash is
              that of both bounds and no row is stored. A set with unfinished samples must not be
              used as if the exact ones were all: leaving out slow samples biases what is left.
  depth       the sample needed 2^depth sweeps from the past
  merged_at   how many sweeps before time 0 the bounds were equal and stayed so
  pair_sum    sum over numbered edges of J s s'; magnetisation: sum of s; occupied: count

LAWS
{conventions}
ENSEMBLES
{ensembles}
WHAT THIS DOES NOT SHOW
  That a sample can be drawn again shows that it follows from seed, law and definition. It does
  not show that the law answers a scientific question, that the seed was not one of many tried,
  or that the generator is random.
"
    )
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn lines_are_wrapped_between_words() {
        assert_eq!(wrapped("one two three", "  ", 9), "  one two\n  three");
        assert_eq!(wrapped("incomprehensible", "", 4), "incomprehensible");
    }
}
