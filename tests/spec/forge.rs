//! The forger's kit: one thing is changed, then as much is made to agree again as the forger cares to.
//!
//! What is computed here (packing, leaves, trees) is computed with the library, as a forger would. That the library is
//! right about them is shown elsewhere, by known answers; here the question is only what its checks notice.

use std::sync::Arc;

use pastproof::archive::npy::Shape;
use pastproof::archive::table::{Columns, Outcome, Row};
use pastproof::archive::wire;
use pastproof::canonical;
use pastproof::lattice::Graph;
use pastproof::law::{Held, Law};
use pastproof::observable::Observables;
use pastproof::plan::Plan;
use pastproof::quantity::{Digest, EnsembleIndex};
use pastproof::random_map::RandomMap;
use pastproof::sample::Configuration;
use pastproof::tree::{Tree, leaf_hash};
use pastproof::{archive::layout, quantity::SampleIndex};
use serde_json::{Value, json};

use crate::members::Members;

/// How much is made to agree again.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Debug)]
pub enum Reseal {
    /// Nothing.
    Nothing,
    /// The manifest.
    Manifest,
    /// The root in the README, and the manifest.
    Root,
    /// The nodes of every tree and their roots in the record, and all of the above.
    Trees,
}

/// The rows of an ensemble and the bytes of its exact samples.
#[derive(Clone)]
pub struct Table {
    pub rows: Vec<Row>,
    pub samples: Vec<Vec<u8>>,
}

impl Table {
    /// The place in `samples` of the sample `index`, which must be exact.
    pub fn exact(&self, index: usize) -> usize {
        self.rows[index].exact_row().expect("an exact sample") as usize
    }

    /// Numbers the rows, and the exact ones among them, from 0.
    pub fn renumber(&mut self) {
        let mut exact = 0;
        for (index, row) in (0..).zip(&mut self.rows) {
            row.index = SampleIndex(index);
            if let Outcome::Exact { row, .. } = &mut row.outcome {
                *row = exact;
                exact += 1;
            }
        }
    }

    /// Takes out one sample, its bytes too.
    pub fn drop_sample(&mut self, index: usize) {
        if self.rows[index].exact_row().is_some() {
            self.samples.remove(self.exact(index));
        }
        self.rows.remove(index);
        self.renumber();
    }

    /// Makes hash and observables of an exact sample those of its bytes.
    pub fn measure(&mut self, index: usize, law: &Law) {
        let place = self.exact(index);
        let bytes = &self.samples[place];
        let sample = Configuration::from_bytes(law.lattice().sites(), bytes).expect("packed sites");
        let measured = Observables::new(law).measure(&sample);
        let row = &mut self.rows[index];
        row.hash = Digest::of(bytes);
        row.outcome = Outcome::Exact {
            row: place as u64,
            observables: measured.iter().map(ToString::to_string).collect(),
        };
    }
}

fn member(ensemble: usize, name: &str) -> String {
    layout::in_ensemble(EnsembleIndex(u32::try_from(ensemble).unwrap()), name)
}

impl Members {
    /// Changes a JSON member and writes it in canonical form.
    pub fn edit_json(&mut self, name: &str, edit: impl FnOnce(&mut Value)) {
        let mut value = self.json(name);
        edit(&mut value);
        self.set(name, canonical::to_bytes(&value).unwrap());
    }

    /// Changes the record.
    pub fn edit_record(&mut self, edit: impl FnOnce(&mut Value)) {
        self.edit_json("record.json", edit);
    }

    /// Replaces a text that must be there, once.
    pub fn replace(&mut self, name: &str, old: &str, new: &str) {
        let text = self.text(name);
        assert_eq!(text.matches(old).count(), 1, "{old:?} in {name}");
        let text = text.replace(old, new);
        self.set(name, text);
    }

    /// The law of an ensemble as its record, graph and held sites say.
    pub fn law(&self, ensemble: usize) -> Law {
        let value = &self.json("record.json")["ensembles"][ensemble]["law"];
        let part = |name: &str| {
            self.has(&member(ensemble, name))
                .then(|| self.json(&member(ensemble, name)))
        };
        let graph = part("graph.json").map(|graph| {
            let sites = value["lattice"]["sites"].as_u64().unwrap();
            Arc::new(Graph::from_json(&graph, sites).unwrap())
        });
        let held = part("held.json").map(|held| Arc::new(Held::from_json(&held).unwrap()));
        Law::from_json(value, graph, held).unwrap()
    }

    /// Rows and samples of an ensemble whose samples lie in one member.
    pub fn table(&self, ensemble: usize) -> Table {
        let law = self.law(ensemble);
        let columns = Columns::new(Observables::new(&law).names()).unwrap();
        let rows = columns.rows(self.bytes(&member(ensemble, "samples.csv"))).unwrap();
        let content = self.bytes(&member(ensemble, "samples/0000.npy"));
        let width = (law.lattice().sites() as usize).div_ceil(8);
        Table {
            rows: rows.map(Result::unwrap).collect(),
            samples: content[128..].chunks_exact(width).map(<[u8]>::to_vec).collect(),
        }
    }

    /// Puts rows and samples of an ensemble in their place.
    pub fn set_table(&mut self, ensemble: usize, table: &Table) {
        let columns = Columns::new(Observables::new(&self.law(ensemble)).names()).unwrap();
        let mut text = columns.first_line().into_bytes();
        for row in &table.rows {
            columns.write_row(row, &mut text).unwrap();
        }
        self.set(&member(ensemble, "samples.csv"), text);
        let shape = Shape::new(table.samples.len() as u64, table.samples[0].len() as u64).unwrap();
        self.set(
            &member(ensemble, "samples/0000.npy"),
            [shape.header().to_vec(), table.samples.concat()].concat(),
        );
    }

    /// Changes rows and samples of the first ensemble.
    pub fn edit_table(&mut self, edit: impl FnOnce(&mut Table)) {
        let mut table = self.table(0);
        edit(&mut table);
        self.set_table(0, &table);
    }

    /// The plan as it stands.
    pub fn plan(&self) -> Plan {
        Plan::read(self.bytes("plan.toml"), &mut |name| {
            Ok(self.bytes(&format!("inputs/{name}")).to_vec())
        })
        .unwrap()
    }

    /// Makes key and thresholds of an ensemble those of its law.
    pub fn follow_law(&mut self, ensemble: usize) {
        let law = self.law(ensemble);
        let map = wire::Map::of(&law, &RandomMap::new(&law).unwrap());
        self.set(&member(ensemble, "map.json"), canonical::to_bytes(&map).unwrap());
        let key = law.key().unwrap();
        self.edit_record(|record| record["ensembles"][ensemble]["key"] = json!(key));
    }

    /// Makes the record's plan digest that of the plan.
    pub fn follow_plan(&mut self) {
        let digest = self.plan().digest().unwrap();
        self.edit_record(|record| record["plan_digest"] = json!(digest));
    }

    /// Makes things agree again; the root that the README shows is taken for that of `before`.
    pub fn reseal(&mut self, before: &Self, degree: Reseal) {
        if degree >= Reseal::Trees {
            let ensembles = self.json("record.json")["ensembles"].as_array().unwrap().len();
            for ensemble in 0..ensembles {
                let rows = self.table(ensemble).rows;
                let tree = Tree::from_leaf_hashes(rows.iter().map(|row| leaf_hash(&row.leaf())).collect());
                let mut nodes = Vec::new();
                tree.write(&mut nodes).unwrap();
                self.set(&member(ensemble, "tree.bin"), nodes);
                self.edit_record(|record| record["ensembles"][ensemble]["samples_root"] = json!(tree.root()));
            }
        }
        if degree >= Reseal::Root {
            let root = |members: &Self| Digest::of(members.bytes("record.json")).to_string();
            let (old, new) = (root(before), root(self));
            self.replace("README.txt", &old, &new);
        }
        if degree >= Reseal::Manifest {
            self.seal();
        }
    }

    /// Makes the manifest anew.
    pub fn seal(&mut self) {
        let end = self.place("MANIFEST.sha256");
        let line = |(name, bytes): &(String, Vec<u8>)| format!("{}  {name}\n", Digest::of(bytes));
        let text: String = self.0[..end].iter().map(line).collect();
        self.set("MANIFEST.sha256", text);
    }
}
