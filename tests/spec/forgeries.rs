//! Forged archives: what is caught by which check, and what by nothing but a root or seal from outside.
//!
//! Each line changes one thing in a golden archive and makes as much agree again as it says. It names the failing
//! checks of `audit` alone, those that a root and a seal from outside add, and those of a replay of every sample:
//! exactly these must fail, no others. Where the archive must be refused, code and place are named.
//!
//! What no check of `audit` and `replay` can see, by design: another run that could have been planned (fewer samples,
//! an ensemble less, another depth limit that no sample meets, the labels of a graph), where the seed came from, and
//! everything that is no science (title, times, checkout). [`NOTHING_ELSE`] lists these lines; only the printed root
//! or seal stands against them.

use std::fs;
use std::path::Path;

use pastproof::archive::reading::Run;
use pastproof::archive::table::Outcome;
use pastproof::audit::replay::{Which, replay};
use pastproof::audit::seal::{Anchors, audit};
use pastproof::audit::{Answer, Check, Conclusion};
use pastproof::engine::Stop;
use pastproof::engine::coupling::{Proof, redraw};
use pastproof::engine::crew::Settings;
use pastproof::engine::plain::Plain;
use pastproof::error::{Class, Error, Result};
use pastproof::observer::Silent;
use pastproof::quantity::{Digest, SampleIndex, Seed};
use pastproof::random_map::RandomMap;
use pastproof::stream::Address;
use serde_json::{Value, json};

use crate::forge::{Reseal, Table};
use crate::members::{Members, golden};

const TORUS: &str = "torus.tar.zst";
const GRAPH: &str = "graph.tar.zst";
const UNFINISHED: &str = "unfinished.tar.zst";
const GAS: &str = "gas.tar.zst";

/// What the checks of a deed must come to.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
enum Caught {
    /// Exactly these checks fail; none: nothing is noticed.
    By(&'static [&'static str]),
    /// The archive is refused with this code, and the message holds this.
    Refused(&'static str, &'static str),
}

/// Which of root and seal from outside disagree.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
enum Outside {
    Neither,
    Seal,
    Both,
}

struct Forgery {
    what: &'static str,
    from: &'static str,
    forge: fn(&mut Members),
    reseal: Reseal,
    /// Changes the bytes of the written file.
    raw: Option<fn(Vec<u8>) -> Vec<u8>>,
    audit: Caught,
    outside: Outside,
    replay: Caught,
    /// What a fault of the audit says, with its place.
    says: &'static str,
}

/// A forgery that is not noticed, until told otherwise.
fn forged(what: &'static str, from: &'static str, reseal: Reseal, forge: fn(&mut Members)) -> Forgery {
    Forgery {
        what,
        from,
        forge,
        reseal,
        raw: None,
        audit: Caught::By(&[]),
        outside: Outside::Seal,
        replay: Caught::By(&[]),
        says: "",
    }
}

/// One that changes nothing but the bytes of the file.
fn raw(what: &'static str, change: fn(Vec<u8>) -> Vec<u8>) -> Forgery {
    Forgery {
        raw: Some(change),
        outside: Outside::Neither,
        ..forged(what, TORUS, Reseal::Nothing, |_| {})
    }
}

impl Forgery {
    fn audit(mut self, checks: &'static [&'static str]) -> Self {
        self.audit = Caught::By(checks);
        self
    }

    fn replay(mut self, checks: &'static [&'static str]) -> Self {
        self.replay = Caught::By(checks);
        self
    }

    fn outside(mut self, outside: Outside) -> Self {
        self.outside = outside;
        self
    }

    fn says(mut self, what: &'static str) -> Self {
        self.says = what;
        self
    }

    fn refused_by_audit(mut self, code: &'static str, message: &'static str) -> Self {
        self.audit = Caught::Refused(code, message);
        self
    }

    fn refused_by_replay(mut self, code: &'static str, message: &'static str) -> Self {
        self.replay = Caught::Refused(code, message);
        self
    }

    fn refused(self, code: &'static str, message: &'static str) -> Self {
        self.refused_by_audit(code, message).refused_by_replay(code, message)
    }
}

/// The checks of a replay that see another sample than the recorded one at the same depth.
const SAMPLE: &[&str] = &["samples", "hashes", "observables"];
/// Those that see other depths too.
const SAMPLE_AND_DEPTH: &[&str] = &["depths", "samples", "hashes", "observables"];

const TABLE: &str = "ensembles/0000/samples.csv";

fn flip(table: &mut Table, index: usize, site: usize) {
    let place = table.exact(index);
    table.samples[place][site / 8] ^= 1 << (site % 8);
}

/// Changes the texts of one line of the first ensemble's table, well formed or not.
fn edit_line(archive: &mut Members, index: usize, edit: impl FnOnce(&mut Vec<String>)) {
    let mut lines: Vec<String> = archive.text(TABLE).lines().map(str::to_string).collect();
    let mut fields: Vec<String> = lines[index + 1].split(',').map(str::to_string).collect();
    edit(&mut fields);
    lines[index + 1] = fields.join(",");
    archive.set(TABLE, lines.join("\n") + "\n");
}

fn set_law(archive: &mut Members, ensemble: usize, field: &str, value: Value) {
    archive.edit_record(|record| record["ensembles"][ensemble]["law"][field] = value);
}

fn set_version(archive: &mut Members, member: &str, field: &str) {
    archive.edit_json(member, |value| value[field] = json!(format!("pastproof {field} 2")));
}

/// Replaces a text in every member of these names.
fn replace_everywhere(archive: &mut Members, names: &[&str], old: &str, new: &str) {
    for name in names {
        let text = archive.text(name);
        assert!(text.contains(old), "{old:?} in {name}");
        let text = text.replace(old, new);
        archive.set(name, text);
    }
}

/// Where the index of an archive begins: behind the last frame, found by its magic number.
fn index_of(file: &[u8]) -> usize {
    let magic = 0x184D_2A57_u32.to_le_bytes();
    file.windows(4).rposition(|window| window == magic).unwrap()
}

fn samples() -> Vec<Forgery> {
    vec![
        forged("one bit of a sample flipped", TORUS, Reseal::Manifest, |archive| {
            archive.edit_table(|table| flip(table, 5, 11));
        })
        .audit(&["hashes", "observables"])
        .says("ensembles/0000/samples/0000.npy: ensemble 0: sample 5: magnetisation: recorded")
        .replay(&["samples"]),
        forged(
            "the same, hash, observables, tree and root following",
            TORUS,
            Reseal::Trees,
            |archive| {
                let law = archive.law(0);
                archive.edit_table(|table| {
                    flip(table, 5, 11);
                    table.measure(5, &law);
                });
            },
        )
        .outside(Outside::Both)
        .replay(SAMPLE),
        forged("two samples swapped wholly", TORUS, Reseal::Trees, |archive| {
            archive.edit_table(|table| {
                table.rows.swap(1, 4);
                table.samples.swap(1, 4);
                table.renumber();
            });
        })
        .outside(Outside::Both)
        .replay(SAMPLE_AND_DEPTH),
        forged(
            "a sample put in place of another one",
            TORUS,
            Reseal::Trees,
            |archive| {
                archive.edit_table(|table| {
                    table.rows[6] = table.rows[1].clone();
                    table.samples[6] = table.samples[1].clone();
                    table.renumber();
                });
            },
        )
        .outside(Outside::Both)
        .replay(SAMPLE),
        forged("an observable rewritten", TORUS, Reseal::Manifest, |archive| {
            edit_line(archive, 3, |fields| fields[7] = "-13".into());
        })
        .audit(&["observables"])
        .replay(&["observables"]),
        forged("a depth raised by one", TORUS, Reseal::Manifest, |archive| {
            archive.edit_table(|table| table.rows[5].depth += 1);
        })
        .audit(&["tree"])
        .replay(&["tree", "depths"]),
        forged("the same, tree and root following", TORUS, Reseal::Trees, |archive| {
            archive.edit_table(|table| table.rows[5].depth += 1);
        })
        .outside(Outside::Both)
        .replay(&["depths"]),
        forged(
            "a depth raised by one, merged_at that of the longer attempt, tree and root following",
            TORUS,
            Reseal::Trees,
            |archive| {
                let law = archive.law(0);
                let map = RandomMap::new(&law).unwrap();
                let seed = archive.json("record.json")["seed"]
                    .as_str()
                    .and_then(Digest::parse)
                    .unwrap();
                let address = Address {
                    seed: Seed(seed),
                    key: law.key().unwrap(),
                    sample: SampleIndex(5),
                };
                archive.edit_table(|table| {
                    let row = &mut table.rows[5];
                    row.depth += 1;
                    let longer = redraw(
                        &mut Plain::new(&map),
                        &address,
                        row.depth,
                        Proof::Fast,
                        &Stop::default(),
                    );
                    row.merged_at = longer.unwrap().0.merged_at;
                });
            },
        )
        .outside(Outside::Both)
        .replay(&["depths"]),
        forged(
            "a depth lowered by one, tree and root following",
            TORUS,
            Reseal::Trees,
            |archive| {
                archive.edit_table(|table| table.rows[5].depth -= 1);
            },
        )
        .outside(Outside::Both)
        .replay(&["depths", "samples", "hashes"]),
        forged(
            "a depth raised beyond the limit, tree and root following",
            TORUS,
            Reseal::Trees,
            |archive| {
                archive.edit_table(|table| table.rows[5].depth = 31);
            },
        )
        .audit(&["indices"])
        .outside(Outside::Both)
        .replay(&["depths"]),
        forged(
            "merged_at changed, tree and root following",
            TORUS,
            Reseal::Trees,
            |archive| {
                archive.edit_table(|table| table.rows[5].merged_at += 1);
            },
        )
        .outside(Outside::Both)
        .replay(&["depths"]),
        forged("merged_at at 2^depth", TORUS, Reseal::Manifest, |archive| {
            edit_line(archive, 5, |fields| fields[3] = "8".into());
        })
        .refused(
            "archive.value",
            "samples.csv: line 7: merged_at: found 8, expected below 8",
        ),
        forged(
            "a hash changed, tree and root following",
            TORUS,
            Reseal::Trees,
            |archive| {
                archive.edit_table(|table| table.rows[5].hash = Digest::of(b"Larkmoor"));
            },
        )
        .audit(&["hashes"])
        .outside(Outside::Both)
        .replay(&["hashes"]),
        forged(
            "bits set in the padding of a sample, hash, tree and root following",
            TORUS,
            Reseal::Trees,
            |archive| {
                archive.edit_table(|table| {
                    table.samples[5][4] |= 0x80;
                    table.rows[5].hash = Digest::of(&table.samples[5]);
                });
            },
        )
        .audit(&["support"])
        .outside(Outside::Both)
        .replay(&["samples", "hashes"]),
        forged(
            "a held value violated, everything following",
            GRAPH,
            Reseal::Trees,
            |archive| {
                let law = archive.law(0);
                archive.edit_table(|table| {
                    flip(table, 5, 3);
                    table.measure(5, &law);
                });
            },
        )
        .audit(&["support"])
        .outside(Outside::Both)
        .replay(SAMPLE),
        forged(
            "two occupied neighbours in the gas, everything following",
            GAS,
            Reseal::Trees,
            |archive| {
                let law = archive.law(0);
                archive.edit_table(|table| {
                    flip(table, 5, 1);
                    table.measure(5, &law);
                });
            },
        )
        .audit(&["support"])
        .outside(Outside::Both)
        .replay(SAMPLE),
    ]
}

fn counts() -> Vec<Forgery> {
    vec![
        forged(
            "the last sample dropped, the number planned as it was",
            TORUS,
            Reseal::Trees,
            |archive| {
                archive.edit_table(|table| table.drop_sample(23));
            },
        )
        .audit(&["indices"])
        .outside(Outside::Both)
        .refused_by_replay(
            "archive.damaged",
            "ensembles/0000/tree.bin: damaged: found 1504 bytes, expected 1536",
        ),
        forged(
            "the last sample dropped, in the record too",
            TORUS,
            Reseal::Trees,
            |archive| {
                archive.edit_table(|table| table.drop_sample(23));
                archive.edit_record(|record| record["ensembles"][0]["samples"] = json!(23));
            },
        )
        .audit(&["parameters"])
        .outside(Outside::Both)
        .replay(&["parameters"]),
        forged(
            "the last sample dropped, in record and plan too",
            TORUS,
            Reseal::Trees,
            |archive| {
                drop_of_last_ensemble(archive, 15);
            },
        )
        .outside(Outside::Both),
        forged(
            "a middle sample dropped and the rest renumbered, in record and plan too",
            TORUS,
            Reseal::Trees,
            |archive| {
                drop_of_last_ensemble(archive, 7);
            },
        )
        .outside(Outside::Both)
        .replay(SAMPLE_AND_DEPTH),
        forged(
            "a row more than samples planned in the record",
            TORUS,
            Reseal::Root,
            |archive| {
                archive.edit_record(|record| record["ensembles"][0]["samples"] = json!(23));
            },
        )
        .audit(&["parameters", "indices"])
        .outside(Outside::Both)
        .replay(&["parameters", "tree"]),
        forged("a row left out", TORUS, Reseal::Manifest, |archive| {
            let text = archive.text(TABLE);
            let kept: String = text
                .split_inclusive('\n')
                .filter(|line| !line.starts_with("7,"))
                .collect();
            archive.set(TABLE, kept);
        })
        .refused("archive.value", "samples.csv: line 9: index: found 8, expected 7"),
        forged("row numbers broken", TORUS, Reseal::Manifest, |archive| {
            edit_line(archive, 7, |fields| fields[4] = "6".into());
        })
        .refused(
            "archive.value",
            "samples.csv: line 9: sample 7: row: found 6, expected 7",
        ),
        forged("a stored sample more than rows", TORUS, Reseal::Manifest, |archive| {
            archive.edit_table(|table| table.samples.push(vec![0; 5]));
        })
        .audit(&["indices"]),
        forged("a stored sample less than rows", TORUS, Reseal::Manifest, |archive| {
            archive.edit_table(|table| {
                table.samples.pop();
            });
        })
        .refused(
            "archive.value",
            "samples/0000.npy: found 23 rows of 5 bytes, expected at least 24 rows of 5 bytes",
        ),
        forged(
            "an unfinished sample relabelled exact, with a made-up state",
            UNFINISHED,
            Reseal::Trees,
            |archive| {
                let law = archive.law(0);
                archive.edit_table(|table| {
                    let observables = Vec::new();
                    table.rows[0].outcome = Outcome::Exact { row: 0, observables };
                    table.samples.insert(0, vec![255, 255, 255, 1]);
                    table.renumber();
                    table.measure(0, &law);
                });
            },
        )
        .outside(Outside::Both)
        .replay(&["depths", "samples", "hashes"]),
        forged(
            "an exact sample relabelled unfinished, with made-up bounds",
            UNFINISHED,
            Reseal::Trees,
            |archive| {
                archive.edit_table(|table| {
                    let state = table.samples.remove(table.exact(4));
                    let row = &mut table.rows[4];
                    row.outcome = Outcome::Unfinished;
                    (row.depth, row.merged_at) = (5, 0);
                    row.hash = Digest::of(&[state.clone(), state].concat());
                    table.renumber();
                });
            },
        )
        .outside(Outside::Both)
        .replay(&["depths", "hashes"]),
        forged(
            "the hash of an unfinished sample changed, tree and root following",
            UNFINISHED,
            Reseal::Trees,
            |archive| {
                archive.edit_table(|table| table.rows[0].hash = Digest::of(b"Larkmoor"));
            },
        )
        .outside(Outside::Both)
        .replay(&["hashes"]),
        forged("the depth limit raised in the record", TORUS, Reseal::Root, |archive| {
            archive.edit_record(|record| record["ensembles"][0]["depth_limit"] = json!(40));
        })
        .audit(&["parameters"])
        .says("record.json: ensemble 0: depth_limit: recorded 40, the plan gives 30")
        .outside(Outside::Both)
        .replay(&["parameters"]),
        forged(
            "the depth limit raised in record and plan, no sample unfinished",
            TORUS,
            Reseal::Root,
            |archive| {
                limit_of_last_ensemble(archive, 40);
            },
        )
        .outside(Outside::Both),
        forged(
            "the depth limit lowered in record and plan, below a sample's depth",
            TORUS,
            Reseal::Root,
            |archive| {
                limit_of_last_ensemble(archive, 6);
            },
        )
        .audit(&["indices"])
        .outside(Outside::Both)
        .replay(&["depths"]),
        forged(
            "the depth limit raised in record and plan, samples unfinished",
            UNFINISHED,
            Reseal::Root,
            raise_limit,
        )
        .audit(&["indices"])
        .outside(Outside::Both)
        .replay(&["depths"]),
        forged(
            "the same, the unfinished samples' depth following",
            UNFINISHED,
            Reseal::Trees,
            |archive| {
                raise_limit(archive);
                archive.edit_table(|table| {
                    for row in table.rows.iter_mut().filter(|row| row.exact_row().is_none()) {
                        row.depth = 6;
                    }
                });
            },
        )
        .outside(Outside::Both)
        .replay(&["depths", "hashes"]),
        forged(
            "the last ensemble dropped, from the plan alone",
            TORUS,
            Reseal::Root,
            |archive| {
                drop_last_of_plan(archive);
                archive.follow_plan();
            },
        )
        .audit(&["parameters"])
        .outside(Outside::Both)
        .replay(&["parameters"]),
        forged(
            "the last ensemble dropped, from the record and its folder",
            TORUS,
            Reseal::Root,
            drop_last_ensemble,
        )
        .audit(&["definition", "parameters"])
        .outside(Outside::Both)
        .replay(&["parameters"]),
        forged(
            "the last ensemble dropped, from plan and circumstances too",
            TORUS,
            Reseal::Root,
            |archive| {
                drop_last_ensemble(archive);
                archive.edit_json("circumstances.json", |value| {
                    value["seconds"].as_array_mut().unwrap().pop();
                });
                drop_last_of_plan(archive);
                archive.follow_plan();
            },
        )
        .outside(Outside::Both),
    ]
}

fn drop_of_last_ensemble(archive: &mut Members, index: usize) {
    let mut table = archive.table(4);
    table.drop_sample(index);
    archive.set_table(4, &table);
    archive.edit_record(|record| record["ensembles"][4]["samples"] = json!(15));
    archive.replace("plan.toml", "samples = 16", "samples = 15");
    archive.follow_plan();
}

fn limit_of_last_ensemble(archive: &mut Members, limit: u8) {
    archive.edit_record(|record| record["ensembles"][4]["depth_limit"] = json!(limit));
    archive.replace(
        "plan.toml",
        "samples = 16",
        &format!("samples = 16\ndepth_limit = {limit}"),
    );
    archive.follow_plan();
}

fn raise_limit(archive: &mut Members) {
    archive.edit_record(|record| record["ensembles"][0]["depth_limit"] = json!(6));
    archive.replace("plan.toml", "depth_limit = 5", "depth_limit = 6");
    archive.follow_plan();
}

fn drop_last_of_plan(archive: &mut Members) {
    let text = archive.text("plan.toml");
    let last = text.rfind("[[ensemble]]").unwrap();
    let text = text[..last].to_string();
    archive.set("plan.toml", text);
}

fn drop_last_ensemble(archive: &mut Members) {
    archive.0.retain(|(name, _)| !name.starts_with("ensembles/0004/"));
    archive.edit_record(|record| {
        record["ensembles"].as_array_mut().unwrap().pop();
    });
}

fn laws_and_seeds() -> Vec<Forgery> {
    vec![
        forged("beta changed in the law", TORUS, Reseal::Root, |archive| {
            set_law(archive, 0, "beta", json!("3/10"));
        })
        .audit(&["parameters", "keys", "thresholds"])
        .outside(Outside::Both)
        .replay(&[
            "parameters",
            "keys",
            "thresholds",
            "depths",
            "samples",
            "hashes",
            "observables",
        ]),
        forged(
            "beta changed in the law, key and thresholds following",
            TORUS,
            Reseal::Root,
            |archive| {
                set_law(archive, 0, "beta", json!("3/10"));
                archive.follow_law(0);
            },
        )
        .audit(&["parameters"])
        .says("record.json: ensemble 0: beta: recorded \"3/10\", the plan gives \"1/4\"")
        .outside(Outside::Both)
        .replay(&["parameters", "depths", "samples", "hashes", "observables"]),
        forged(
            "beta changed everywhere, the plan and its digest too",
            TORUS,
            Reseal::Root,
            |archive| {
                for ensemble in [0, 1] {
                    set_law(archive, ensemble, "beta", json!("3/10"));
                    archive.follow_law(ensemble);
                }
                archive.replace("plan.toml", "0.25", "0.30");
                archive.follow_plan();
            },
        )
        .outside(Outside::Both)
        .replay(SAMPLE_AND_DEPTH),
        forged("a key changed", TORUS, Reseal::Root, |archive| {
            archive.edit_record(|record| record["ensembles"][0]["key"] = json!(Digest::of(b"Larkmoor")));
        })
        .audit(&["keys"])
        .outside(Outside::Both)
        .replay(&["keys"]),
        forged("the meaning of the bits changed", TORUS, Reseal::Root, |archive| {
            archive.edit_record(|record| record["ensembles"][0]["state"][0]["values"] = json!([1, -1]));
        })
        .audit(&["keys"])
        .outside(Outside::Both)
        .replay(&["keys"]),
        forged("a threshold off by one unit", TORUS, Reseal::Manifest, |archive| {
            archive.edit_json("ensembles/0000/map.json", |map| {
                let theta = map["thresholds"][1][1].as_str().unwrap().parse::<u128>().unwrap();
                map["thresholds"][1][1] = json!((theta + 1).to_string());
            });
        })
        .audit(&["thresholds"])
        .says("ensembles/0000/map.json: ensemble 0: threshold at local field")
        .replay(&["thresholds"]),
        forged("a threshold left out", TORUS, Reseal::Manifest, |archive| {
            archive.edit_json("ensembles/0000/map.json", |map| {
                map["thresholds"].as_array_mut().unwrap().remove(0);
            });
        })
        .audit(&["thresholds"])
        .replay(&["thresholds"]),
        forged("the lanes of a list changed", TORUS, Reseal::Manifest, |archive| {
            archive.edit_json("ensembles/0000/map.json", |map| map["lanes"][0] = json!(1));
        })
        .audit(&["thresholds"])
        .replay(&["thresholds"]),
        forged("the seed of a phrase changed", TORUS, Reseal::Root, |archive| {
            archive.edit_record(|record| record["seed"] = json!(Digest::of(b"Larkmoor")));
        })
        .audit(&["parameters"])
        .outside(Outside::Both)
        .replay(&["parameters", "depths", "samples", "hashes", "observables"]),
        forged("a seed from entropy changed", GAS, Reseal::Root, |archive| {
            archive.edit_record(|record| record["seed"] = json!(Digest::of(b"Larkmoor")));
        })
        .outside(Outside::Both)
        .replay(SAMPLE_AND_DEPTH),
        forged(
            "the phrase changed in plan and record, not the seed",
            TORUS,
            Reseal::Root,
            |archive| {
                archive.replace("plan.toml", "Larkmoor, golden torus", "Larkmoor, another");
                archive.edit_record(|record| record["seed_rule"]["phrase"] = json!("Larkmoor, another"));
                archive.follow_plan();
            },
        )
        .audit(&["parameters"])
        .outside(Outside::Both)
        .replay(&["parameters"]),
        forged(
            "a seed rule said to be entropy, in the record",
            TORUS,
            Reseal::Root,
            |archive| {
                archive.edit_record(|record| record["seed_rule"] = json!({ "rule": "entropy" }));
            },
        )
        .audit(&["parameters"])
        .outside(Outside::Both)
        .replay(&["parameters"]),
        forged(
            "a seed rule said to be entropy, in record and plan",
            TORUS,
            Reseal::Root,
            |archive| {
                archive.edit_record(|record| record["seed_rule"] = json!({ "rule": "entropy" }));
                archive.replace("plan.toml", "[seed]\nphrase = \"Larkmoor, golden torus\"\n", "");
                archive.follow_plan();
            },
        )
        .outside(Outside::Both),
        forged("the digest of the plan changed", TORUS, Reseal::Root, |archive| {
            archive.edit_record(|record| record["plan_digest"] = json!(Digest::of(b"Larkmoor")));
        })
        .audit(&["parameters"])
        .outside(Outside::Both)
        .replay(&["parameters"]),
        forged(
            "a coupling changed in the file of edges",
            GRAPH,
            Reseal::Manifest,
            |archive| {
                archive.replace("inputs/moor/bonds.csv", "0.75", "0.7");
            },
        )
        .audit(&["parameters", "inputs"])
        .replay(&["parameters"]),
        forged("a held value changed in its file", GRAPH, Reseal::Manifest, |archive| {
            archive.replace("inputs/moor/held.csv", "fell,1", "fell,-1");
        })
        .audit(&["parameters", "inputs"])
        .replay(&["parameters"]),
        forged("a coupling changed in the graph", GRAPH, Reseal::Manifest, |archive| {
            archive.edit_json("ensembles/0000/graph.json", |graph| {
                graph["couplings"][3] = json!("7/10")
            });
        })
        .refused("archive.conflict", "record.json: ensemble 0: lattice: "),
        forged("a held value changed", GRAPH, Reseal::Manifest, |archive| {
            archive.edit_json("ensembles/0000/held.json", |held| held[0][1] = json!(-1));
        })
        .refused("archive.conflict", "record.json: ensemble 0: held: "),
        forged("a label changed in sites.csv", GRAPH, Reseal::Manifest, |archive| {
            archive.replace("ensembles/0000/sites.csv", "lone tor", "lone fir");
        })
        .audit(&["inputs"]),
        forged("a label changed everywhere", GRAPH, Reseal::Manifest, |archive| {
            let names = [
                "inputs/moor/bonds.csv",
                "inputs/moor/sites.csv",
                "ensembles/0000/sites.csv",
                "ensembles/0001/sites.csv",
                "ensembles/0002/sites.csv",
            ];
            replace_everywhere(archive, &names, "tarn", "pool");
        }),
        forged("first_depth changed in the plan", TORUS, Reseal::Manifest, |archive| {
            archive.replace("plan.toml", "samples = 16", "samples = 16\nfirst_depth = 3");
        }),
        forged("another title in the plan", TORUS, Reseal::Manifest, |archive| {
            archive.replace("plan.toml", "odd torus", "even torus");
        }),
    ]
}

fn members() -> Vec<Forgery> {
    vec![
        forged("nothing changed", TORUS, Reseal::Manifest, |_| {}).outside(Outside::Neither),
        forged("a node of the tree changed", TORUS, Reseal::Manifest, |archive| {
            flip_byte(archive, "ensembles/0000/tree.bin", 0);
        })
        .audit(&["tree"])
        .replay(&["tree"]),
        forged(
            "the top of the tree changed, on no sample's path",
            TORUS,
            Reseal::Manifest,
            |archive| {
                let end = archive.bytes("ensembles/0000/tree.bin").len();
                flip_byte(archive, "ensembles/0000/tree.bin", end - 1);
            },
        )
        .audit(&["tree"]),
        forged("the tree cut short", TORUS, Reseal::Manifest, |archive| {
            let nodes = archive.bytes("ensembles/0000/tree.bin");
            let nodes = nodes[..nodes.len() - 32].to_vec();
            archive.set("ensembles/0000/tree.bin", nodes);
        })
        .audit(&["tree"])
        .refused_by_replay(
            "archive.damaged",
            "ensembles/0000/tree.bin: damaged: found 1504 bytes, expected 1536",
        ),
        forged("the root of the samples changed", TORUS, Reseal::Root, |archive| {
            archive.edit_record(|record| record["ensembles"][0]["samples_root"] = json!(Digest::of(b"Larkmoor")));
        })
        .audit(&["tree"])
        .outside(Outside::Both)
        .replay(&["tree"]),
        forged("a line of the manifest changed", TORUS, Reseal::Nothing, |archive| {
            let text = archive.text("MANIFEST.sha256");
            let other = if text.starts_with('0') { "1" } else { "0" };
            let text = other.to_string() + &text[1..];
            archive.set("MANIFEST.sha256", text);
        })
        .audit(&["manifest"]),
        forged("a line of the manifest left out", TORUS, Reseal::Nothing, |archive| {
            let text = archive.text("MANIFEST.sha256");
            let text = text[text.find('\n').unwrap() + 1..].to_string();
            archive.set("MANIFEST.sha256", text);
        })
        .audit(&["manifest"]),
        forged(
            "the last line of the manifest left out",
            TORUS,
            Reseal::Nothing,
            |archive| {
                let text = archive.text("MANIFEST.sha256");
                let last = text.trim_end().rfind('\n').unwrap();
                let text = text[..=last].to_string();
                archive.set("MANIFEST.sha256", text);
            },
        )
        .audit(&["manifest"])
        .says("circumstances.json: stands above the manifest, but is not listed"),
        forged(
            "a line of the manifest for a member that is not there",
            TORUS,
            Reseal::Nothing,
            |archive| {
                let text = archive.text("MANIFEST.sha256");
                let text = format!("{text}{}  difference.patch\n", Digest::of(b"Larkmoor"));
                archive.set("MANIFEST.sha256", text);
            },
        )
        .audit(&["manifest"])
        .says("difference.patch: listed, but not there above the manifest"),
        forged(
            "the lines of the manifest in another order",
            TORUS,
            Reseal::Nothing,
            |archive| {
                let mut lines: Vec<&str> = archive.text("MANIFEST.sha256").split_inclusive('\n').collect();
                lines.swap(0, 1);
                let text = lines.concat();
                archive.set("MANIFEST.sha256", text);
            },
        )
        .audit(&["manifest"])
        .says("MANIFEST.sha256: the lines stand in another order"),
        forged("a manifest that is none", TORUS, Reseal::Nothing, |archive| {
            archive.set("MANIFEST.sha256", *b"see the other one\n");
        })
        .refused_by_audit("archive.syntax", "MANIFEST.sha256: line 1: "),
        forged("an empty manifest", TORUS, Reseal::Nothing, |archive| {
            archive.set("MANIFEST.sha256", Vec::new());
        })
        .refused_by_audit("archive.nothing", "MANIFEST.sha256: nothing to check"),
        forged("the manifest removed", TORUS, Reseal::Nothing, |archive| {
            remove(archive, "MANIFEST.sha256")
        })
        .refused_by_audit("archive.missing", "MANIFEST.sha256: "),
        forged(
            "the manifest not made anew after a change",
            TORUS,
            Reseal::Nothing,
            |archive| {
                archive.replace("README.txt", "NumPy", "Numpy");
            },
        )
        .audit(&["manifest"])
        .outside(Outside::Neither),
        forged("an unknown member", TORUS, Reseal::Manifest, |archive| {
            let place = archive.place("circumstances.json");
            archive
                .0
                .insert(place, ("ensembles/0000/notes.txt".into(), b"new science".to_vec()));
        })
        .refused("archive.unknown", "unknown member \"ensembles/0000/notes.txt\""),
        forged(
            "an unknown member behind the manifest",
            TORUS,
            Reseal::Manifest,
            |archive| {
                archive.0.push(("notes.txt".into(), b"new science".to_vec()));
            },
        )
        .refused("archive.unknown", "unknown member \"notes.txt\""),
        forged(
            "a file that the plan does not name",
            TORUS,
            Reseal::Manifest,
            |archive| {
                let place = archive.place("STREAM.md");
                archive.0.insert(place, ("inputs/more.csv".into(), b"a,b\n".to_vec()));
            },
        )
        .audit(&["layout"])
        .says("inputs/more.csv: unknown member"),
        forged(
            "a file that the plan does not name, behind the manifest",
            TORUS,
            Reseal::Manifest,
            |archive| {
                archive.0.push(("inputs/more.csv".into(), b"a,b\n".to_vec()));
            },
        )
        .audit(&["layout"])
        .outside(Outside::Neither)
        .says("inputs/more.csv: unknown member"),
        forged("a member added in attest/", TORUS, Reseal::Manifest, |archive| {
            archive
                .0
                .push(("attest/witness.txt".into(), b"seen at Larkmoor".to_vec()));
        })
        .outside(Outside::Neither),
        forged(
            "a member in attest/ above the manifest",
            TORUS,
            Reseal::Manifest,
            |archive| {
                archive
                    .0
                    .insert(0, ("attest/witness.txt".into(), b"seen at Larkmoor".to_vec()));
            },
        )
        .audit(&["layout"]),
        forged("members in another order", TORUS, Reseal::Manifest, |archive| {
            let place = archive.place("record.json");
            archive.0.swap(place, place + 1);
        })
        .audit(&["layout"])
        .says("found provenance.json, expected record.json in that place"),
        forged("the README removed", TORUS, Reseal::Manifest, |archive| {
            remove(archive, "README.txt")
        })
        .audit(&["layout"])
        .says("README.txt: the member is missing"),
        forged("the provenance removed", TORUS, Reseal::Manifest, |archive| {
            remove(archive, "provenance.json")
        })
        .refused_by_audit("archive.missing", "provenance.json: "),
        forged("the circumstances removed", TORUS, Reseal::Manifest, |archive| {
            remove(archive, "circumstances.json")
        })
        .refused_by_audit("archive.missing", "circumstances.json: "),
        forged("the plan removed", TORUS, Reseal::Manifest, |archive| {
            remove(archive, "plan.toml")
        })
        .refused("archive.missing", "plan.toml: "),
        forged("the record removed", TORUS, Reseal::Manifest, |archive| {
            remove(archive, "record.json")
        })
        .refused("archive.missing", "record.json: "),
        forged("the thresholds removed", TORUS, Reseal::Manifest, |archive| {
            remove(archive, "ensembles/0000/map.json")
        })
        .refused("archive.missing", "ensembles/0000/map.json: "),
        forged("a table removed", TORUS, Reseal::Manifest, |archive| {
            remove(archive, TABLE)
        })
        .refused("archive.missing", "ensembles/0000/samples.csv: "),
        forged("a tree removed", TORUS, Reseal::Manifest, |archive| {
            remove(archive, "ensembles/0000/tree.bin")
        })
        .refused("archive.missing", "ensembles/0000/tree.bin: "),
        forged("the samples removed", TORUS, Reseal::Manifest, |archive| {
            remove(archive, "ensembles/0000/samples/0000.npy")
        })
        .refused("archive.missing", "ensembles/0000/samples/0000.npy: "),
        forged("a file of the plan removed", GRAPH, Reseal::Manifest, |archive| {
            remove(archive, "inputs/moor/bonds.csv")
        })
        .refused("archive.missing", "inputs/moor/bonds.csv: "),
        forged("the graph removed", GRAPH, Reseal::Manifest, |archive| {
            remove(archive, "ensembles/0000/graph.json")
        })
        .refused(
            "archive.missing",
            "record.json: ensemble 0: lattice: the graph is missing",
        ),
        forged("the held sites removed", GRAPH, Reseal::Manifest, |archive| {
            remove(archive, "ensembles/0000/held.json")
        })
        .refused(
            "archive.missing",
            "record.json: ensemble 0: held: the list of held sites is missing",
        ),
        forged(
            "the held sites put beside another ensemble",
            GRAPH,
            Reseal::Manifest,
            |archive| {
                let held = archive.bytes("ensembles/0000/held.json").to_vec();
                let place = archive.place("ensembles/0002/samples.csv");
                archive.0.insert(place, ("ensembles/0002/held.json".into(), held));
            },
        )
        .refused(
            "archive.conflict",
            "record.json: ensemble 2: held: held sites stand beside a law that names none",
        ),
        forged("the root in the README changed", TORUS, Reseal::Manifest, |archive| {
            let root = Digest::of(archive.bytes("record.json")).to_string();
            archive.replace("README.txt", &root, &Digest::of(b"Larkmoor").to_string());
        })
        .audit(&["definition"]),
        forged("STREAM.md changed", TORUS, Reseal::Manifest, |archive| {
            archive.replace("STREAM.md", "19 bytes, the last", "20 bytes, the last");
        })
        .audit(&["definition"]),
        forged(
            "STREAM.md changed, its digest in the record too",
            TORUS,
            Reseal::Root,
            |archive| {
                archive.replace("STREAM.md", "19 bytes, the last", "20 bytes, the last");
                let digest = Digest::of(archive.bytes("STREAM.md"));
                archive.edit_record(|record| record["stream"]["sha256"] = json!(digest));
            },
        )
        .refused("archive.unsupported", "record.json: not supported: stream definition"),
        forged("the author's difference changed", GRAPH, Reseal::Manifest, |archive| {
            archive.replace("difference.patch", "+beta = [0.5, 0.8]", "+beta = [0.5, 0.9]");
        })
        .audit(&["definition"]),
        forged(
            "the author's difference changed, in the provenance too",
            GRAPH,
            Reseal::Manifest,
            |archive| {
                archive.replace("difference.patch", "+beta = [0.5, 0.8]", "+beta = [0.5, 0.9]");
                let digest = Digest::of(archive.bytes("difference.patch"));
                archive.edit_json("provenance.json", |value| {
                    value["repository"]["difference"] = json!(digest)
                });
            },
        ),
        forged(
            "a difference that the provenance does not name",
            GRAPH,
            Reseal::Manifest,
            |archive| {
                archive.edit_json("provenance.json", |value| value["repository"]["patch"] = Value::Null);
            },
        )
        .audit(&["layout"]),
        forged("the author's commit changed", GRAPH, Reseal::Manifest, |archive| {
            archive.edit_json("provenance.json", |value| {
                value["repository"]["commit"] = json!("0".repeat(40))
            });
        }),
        forged("the times changed", TORUS, Reseal::Manifest, |archive| {
            archive.edit_json("circumstances.json", |value| {
                value["start"] = json!("2026-01-01T00:00:00Z")
            });
        }),
    ]
}

fn flip_byte(archive: &mut Members, name: &str, at: usize) {
    let place = archive.place(name);
    archive.0[place].1[at] ^= 1;
}

fn remove(archive: &mut Members, name: &str) {
    let place = archive.place(name);
    archive.0.remove(place);
}

fn words() -> Vec<Forgery> {
    vec![
        forged("a later record", TORUS, Reseal::Root, |archive| {
            set_version(archive, "record.json", "record")
        })
        .refused(
            "archive.unsupported",
            "record.json: not supported: found \"pastproof record 2\"",
        ),
        forged("a later map", TORUS, Reseal::Manifest, |archive| {
            set_version(archive, "ensembles/0000/map.json", "map")
        })
        .refused(
            "archive.unsupported",
            "ensembles/0000/map.json: not supported: found \"pastproof map 2\"",
        ),
        forged("a later provenance", TORUS, Reseal::Manifest, |archive| {
            set_version(archive, "provenance.json", "provenance");
        })
        .refused_by_audit(
            "archive.unsupported",
            "provenance.json: not supported: found \"pastproof provenance 2\"",
        ),
        forged("later circumstances", TORUS, Reseal::Manifest, |archive| {
            set_version(archive, "circumstances.json", "circumstances");
        })
        .refused_by_audit("archive.unsupported", "circumstances.json: not supported: found"),
        forged("an unknown field in the record", TORUS, Reseal::Root, |archive| {
            archive.edit_record(|record| record["commitment"] = Value::Null);
        })
        .refused(
            "archive.syntax",
            "record.json: not valid JSON: unknown field `commitment`",
        ),
        forged("an unknown field in a law", TORUS, Reseal::Root, |archive| {
            set_law(archive, 0, "disorder", Value::Null)
        })
        .refused(
            "archive.syntax",
            "record.json: ensemble 0: not valid JSON: unknown field",
        ),
        forged("an unknown law", TORUS, Reseal::Root, |archive| {
            set_law(archive, 0, "law", json!("potts"))
        })
        .refused(
            "archive.unsupported",
            "record.json: ensemble 0: not supported: law \"potts\", known: ising, lattice-gas",
        ),
        forged("an unknown map", TORUS, Reseal::Root, |archive| {
            set_law(archive, 0, "map", json!("bond heat bath"))
        })
        .refused(
            "archive.unsupported",
            "record.json: ensemble 0: not supported: random map \"bond heat bath\"",
        ),
        forged("an unknown protocol", TORUS, Reseal::Root, |archive| {
            set_law(archive, 0, "protocol", json!("read-once"))
        })
        .refused(
            "archive.unsupported",
            "record.json: ensemble 0: not supported: random map",
        ),
        forged("an unknown lattice", TORUS, Reseal::Root, |archive| {
            archive.edit_record(|record| record["ensembles"][0]["law"]["lattice"]["kind"] = json!("kagome"));
        })
        .refused("archive.value", "record.json: ensemble 0: lattice: found \"kagome\""),
        forged("an unknown stopping rule", TORUS, Reseal::Root, |archive| {
            archive.edit_record(|record| record["ensembles"][0]["stopping"] = json!("when it suits"));
        })
        .refused(
            "archive.unsupported",
            "record.json: ensembles[0]: not supported: stopping rule",
        ),
        forged("an unknown status", TORUS, Reseal::Manifest, |archive| {
            edit_line(archive, 5, |fields| fields[1] = "nearly".into());
        })
        .refused("archive.value", "samples.csv: line 7: status: found \"nearly\""),
        forged("a number with a leading zero", TORUS, Reseal::Manifest, |archive| {
            edit_line(archive, 5, |fields| fields[2] = "05".into());
        })
        .refused("archive.value", "samples.csv: line 7: depth: found \"05\""),
        forged("a column more", TORUS, Reseal::Manifest, |archive| {
            edit_line(archive, 5, |fields| fields.push("1".into()));
        })
        .refused(
            "archive.syntax",
            "samples.csv: line 7: not valid table: found 9 columns, expected 8",
        ),
        forged("another array header", TORUS, Reseal::Manifest, |archive| {
            let bytes = archive.bytes("ensembles/0000/samples/0000.npy").to_vec();
            let at = bytes.windows(3).position(|window| window == b"|u1").unwrap();
            flip_byte(archive, "ensembles/0000/samples/0000.npy", at + 2);
        })
        .refused("archive.damaged", "samples/0000.npy: damaged: npy header"),
        forged("a record that is not canonical", TORUS, Reseal::Manifest, |archive| {
            let text = archive.text("record.json").replacen(':', ": ", 1);
            archive.set("record.json", text);
        })
        .refused("archive.syntax", "record.json: not valid JSON: not in canonical form"),
        forged("a seed that stands twice", TORUS, Reseal::Manifest, |archive| {
            let text = archive
                .text("record.json")
                .replacen("\"seed\":", "\"seed\":\"\",\"seed\":", 1);
            archive.set("record.json", text);
        })
        .refused("archive.syntax", "record.json: not valid JSON: duplicate key \"seed\""),
        forged("a record without ensembles", TORUS, Reseal::Root, |archive| {
            archive.edit_record(|record| record["ensembles"] = json!([]));
        })
        .refused("archive.nothing", "record.json: nothing to check"),
        forged("an ensemble without samples", TORUS, Reseal::Root, |archive| {
            archive.edit_record(|record| record["ensembles"][0]["samples"] = json!(0));
        })
        .refused("archive.nothing", "record.json: ensembles[0]: nothing to check"),
        forged("a plan that is no TOML", TORUS, Reseal::Manifest, |archive| {
            archive.replace("plan.toml", "[seed]", "[seed");
        })
        .refused("archive.syntax", "plan.toml: line 3: not valid TOML"),
        raw("the index removed", |mut file| {
            file.truncate(index_of(&file));
            file
        }),
        raw("compressed anew in one frame, without index", |file| {
            zstd::encode_all(zstd::decode_all(file.as_slice()).unwrap().as_slice(), 19).unwrap()
        }),
        raw("a bit of the index flipped", |mut file| {
            let at = index_of(&file) + 20;
            file[at] ^= 1;
            file
        })
        .audit(&["container"]),
        raw("a byte behind the end", |mut file| {
            file.push(0);
            file
        })
        .refused("archive.damaged", "damaged: "),
        raw("cut short", |mut file| {
            file.truncate(index_of(&file) - 30);
            file
        })
        .refused("archive.damaged", "damaged: "),
    ]
}

fn all() -> Vec<Forgery> {
    [samples(), counts(), laws_and_seeds(), members(), words()]
        .into_iter()
        .flatten()
        .collect()
}

/// The forgeries that only a root or seal from outside reveals.
const NOTHING_ELSE: [&str; 10] = [
    "the last sample dropped, in record and plan too",
    "the depth limit raised in record and plan, no sample unfinished",
    "the last ensemble dropped, from plan and circumstances too",
    "a seed rule said to be entropy, in record and plan",
    "a label changed everywhere",
    "first_depth changed in the plan",
    "another title in the plan",
    "the author's difference changed, in the provenance too",
    "the author's commit changed",
    "the times changed",
];

/// What a deed came to, as [`Caught`] says it.
fn outcome(result: Result<(Vec<Check>, Conclusion)>, usual: Conclusion) -> Result<Vec<&'static str>, Error> {
    let (checks, conclusion) = result?;
    let failing = checks.iter().filter(|check| check.answer == Answer::Fails);
    let failing: Vec<_> = failing
        .inspect(|check| {
            assert!(check.fault_count >= 1 && !check.faults.is_empty(), "{check:?}");
            assert!(check.faults.iter().all(|fault| !fault.what.is_empty()));
        })
        .map(|check| check.id)
        .collect();
    let expected = if failing.is_empty() { usual } else { Conclusion::Fails };
    assert_eq!(conclusion, expected);
    Ok(failing)
}

/// Says how `found` differs from what is expected, if it does.
fn differs(deed: &str, found: Result<Vec<&'static str>, Error>, expected: Caught, added: &[&str]) -> Option<String> {
    match (found, expected) {
        (Ok(found), Caught::By(checks)) => {
            let mut found = found;
            let mut expected = [checks, added].concat();
            found.sort_unstable();
            expected.sort_unstable();
            (found != expected).then(|| format!("{deed}: failing {found:?}, expected {expected:?}"))
        }
        (Err(error), Caught::Refused(code, part)) => {
            let placed = error.location().path.is_some() && error.class() == Class::Archive;
            let as_expected = placed && error.code() == code && error.to_string().contains(part);
            (!as_expected).then(|| format!("{deed}: {error}, expected {part:?} [{code}]"))
        }
        (Ok(found), expected) => Some(format!("{deed}: failing {found:?}, expected {expected:?}")),
        (Err(error), expected) => Some(format!("{deed}: {error}, expected {expected:?}")),
    }
}

fn differences(forgery: &Forgery, path: &Path) -> Vec<String> {
    let original = Members::open(&golden(forgery.from));
    let mut archive = original.clone();
    (forgery.forge)(&mut archive);
    archive.reseal(&original, forgery.reseal);
    archive.write(path);
    if let Some(change) = forgery.raw {
        fs::write(path, change(fs::read(path).unwrap())).unwrap();
    }

    let usual = if forgery.from == UNFINISHED {
        Conclusion::Incomplete
    } else {
        Conclusion::Holds
    };
    let audited = |anchors| {
        let report = audit(path, anchors, &Silent).map(|report| (report.checks, report.conclusion));
        if let Ok((checks, _)) = &report {
            let told: Vec<_> = checks
                .iter()
                .flat_map(|check| &check.faults)
                .map(ToString::to_string)
                .collect();
            let said = forgery.says.is_empty() || told.iter().any(|fault| fault.contains(forgery.says));
            assert!(said, "{}: {told:?}", forgery.what);
        }
        outcome(report, usual)
    };
    let anchors = Anchors {
        root: Some(Digest::of(original.bytes("record.json"))),
        seal: Some(Digest::of(original.bytes("MANIFEST.sha256"))),
    };
    let replayed = Run::open(path)
        .and_then(|run| {
            replay(
                &run,
                Which::All,
                Proof::Full,
                &Settings::default(),
                &Silent,
                &Stop::default(),
            )
        })
        .map(|report| (report.checks, report.conclusion));
    let added: &[&str] = match forgery.outside {
        Outside::Neither => &[],
        Outside::Seal => &["seal"],
        Outside::Both => &["root", "seal"],
    };
    [
        differs("audit", audited(Anchors::default()), forgery.audit, &[]),
        differs("audit with root and seal", audited(anchors), forgery.audit, added),
        differs("replay", outcome(replayed, usual), forgery.replay, &[]),
    ]
    .into_iter()
    .flatten()
    .collect()
}

#[test]
fn every_forgery_is_caught_by_exactly_the_checks_that_should() {
    let folder = tempfile::TempDir::new().unwrap();
    let path = folder.path().join("forged.tar.zst");
    let mut faults = Vec::new();
    for forgery in all() {
        for difference in differences(&forgery, &path) {
            faults.push(format!("{}: {difference}", forgery.what));
        }
    }
    assert!(faults.is_empty(), "{} faults\n{}", faults.len(), faults.join("\n"));
}

/// What audit and replay cannot see is listed, and each line of the list differs in root or seal.
#[test]
fn what_only_the_outside_reveals_is_listed() {
    let unseen = all().into_iter().filter(|forgery| {
        forgery.audit == Caught::By(&[]) && forgery.replay == Caught::By(&[]) && forgery.outside != Outside::Neither
    });
    assert_eq!(unseen.map(|forgery| forgery.what).collect::<Vec<_>>(), NOTHING_ELSE);
}

#[test]
fn every_forgery_has_a_name_of_its_own() {
    let mut names: Vec<_> = all().iter().map(|forgery| forgery.what).collect();
    let count = names.len();
    names.sort_unstable();
    names.dedup();
    assert_eq!(names.len(), count);
    assert!(count > 100, "{count}");
}
