//! From the tables of a plan to ensembles: laws, lattices, and the grid of their parameters.
//!
//! Apart from the plan as a value: here stand the names of the keys. A parameter given as a list
//! makes a grid, in documented order; a graph file is read once and shared by all its points.

use std::collections::BTreeMap;
use std::sync::Arc;

use super::graph_files::{LabelledGraph, read_graph, read_held};
use super::table::{Entry, Table, shown};
use super::{DEEPEST, DEPTH_LIMIT, Ensemble, InputFile, LARGEST_FILE, MOST_ENSEMBLES, MOST_SAMPLES, check_file_name};
use crate::error::{Error, Result};
use crate::lattice::{Boundary, Kind, Lattice, Regular};
use crate::law::{Beta, Critical, Law, Model};
use crate::number::Exact;
use crate::quantity::Digest;

/// The keys of every ensemble table, whatever its law.
const COMMON_KEYS: [&str; 6] = ["law", "lattice", "samples", "depth_limit", "first_depth", "held"];
const ISING_KEYS: [&str; 4] = ["beta", "temperature", "coupling", "field"];
const GAS_KEYS: [&str; 1] = ["activity"];
const REGULAR_KEYS: [&str; 3] = ["kind", "extents", "boundary"];
const GRAPH_KEYS: [&str; 3] = ["kind", "edges", "sites"];
/// Laws that the stream definition has and this version does not.
const LATER_LAWS: [&str; 2] = ["random-cluster", "potts"];

/// Reads a file that a plan names.
pub(super) type ReadFile<'a> = dyn FnMut(&str) -> Result<Vec<u8>> + 'a;

/// The ensembles of a plan as they are read, one table after the other.
pub(super) struct Grid<'a> {
    read_file: &'a mut ReadFile<'a>,
    pub(super) files: Vec<InputFile>,
    pub(super) ensembles: Vec<Ensemble>,
    /// The place in `files` of each name.
    names: BTreeMap<String, usize>,
    graphs: BTreeMap<(String, Option<String>), Arc<LabelledGraph>>,
    /// The place in `ensembles` of each key.
    keys: BTreeMap<Digest, usize>,
}

/// A lattice and, on a graph, the labels of its sites.
struct Place {
    lattice: Lattice,
    graph: Option<Arc<LabelledGraph>>,
}

impl<'a> Grid<'a> {
    pub(super) fn new(read_file: &'a mut ReadFile<'a>) -> Self {
        Self {
            read_file,
            files: Vec::new(),
            ensembles: Vec::new(),
            names: BTreeMap::new(),
            graphs: BTreeMap::new(),
            keys: BTreeMap::new(),
        }
    }

    /// Adds the ensembles of one table.
    pub(super) fn add(&mut self, table: Table<'_>) -> Result<()> {
        let law = table.need("law", "ising or lattice-gas")?;
        let own_keys = match law.text("ising or lattice-gas")? {
            "ising" => ISING_KEYS.as_slice(),
            "lattice-gas" => &GAS_KEYS,
            later if LATER_LAWS.contains(&later) => {
                let found = format!("{later:?}, which this version does not know yet");
                return Err(law.place(Error::value(found, "ising or lattice-gas")));
            }
            _ => return Err(law.wrong("ising or lattice-gas")),
        };
        table.only(&[&COMMON_KEYS, own_keys].concat())?;

        let samples = table
            .need("samples", "the number of samples of each ensemble")?
            .whole(1..=MOST_SAMPLES)?;
        let depth = |key, default, most: u8| -> Result<u8> {
            let Some(entry) = table.get(key) else {
                return Ok(default);
            };
            Ok(u8::try_from(entry.whole(0..=u64::from(most))?).unwrap_or(most))
        };
        let depth_limit = depth("depth_limit", DEPTH_LIMIT, DEEPEST)?;
        let first_depth = depth("first_depth", 0, depth_limit)?;

        let place = self.lattice(table.need("lattice", "a table with the key \"kind\"")?)?;
        let models = if own_keys == GAS_KEYS {
            self.gas_models(table)?
        } else {
            self.ising_models(table, &place)?
        };
        let held = match table.get("held") {
            None => None,
            Some(entry) => {
                let file = self.file(entry)?;
                let held = read_held(&self.files[file], place.lattice.sites(), place.graph.as_deref())?;
                Some(Arc::new(held))
            }
        };
        for model in models {
            let law = Law::new(model, place.lattice.clone(), held.clone()).map_err(|error| table.place(error))?;
            let key = law.key()?;
            let line = table.line();
            if let Some(first) = self.keys.insert(key, self.ensembles.len()) {
                let what = format!(
                    "one law twice, on line {} and on line {line}: {}; the two ensembles would hold the same samples",
                    self.ensembles[first].line,
                    point(law.model()),
                );
                return Err(Error::conflict(what).at_line(line));
            }
            self.ensembles.push(Ensemble {
                law,
                key,
                samples,
                depth_limit,
                first_depth,
                labels: place.graph.as_ref().map(|graph| graph.labels.clone()),
                line,
            });
        }
        Ok(())
    }

    fn ising_models(&self, table: Table<'_>, place: &Place) -> Result<Vec<Model>> {
        let betas = match (table.get("beta"), table.get("temperature")) {
            (Some(_), Some(temperature)) => {
                return Err(temperature.place(Error::conflict("temperature stands beside beta: give one of the two")));
            }
            (Some(entry), None) => each(entry, |entry| beta(entry, &place.lattice))?,
            (None, Some(entry)) => each(entry, inverse)?,
            (None, None) => {
                let expected = "a number, a list of numbers or \"critical\", or the key \"temperature\"";
                return Err(table.place(Error::missing("key \"beta\"", expected)));
            }
        };
        let graph = place.lattice.graph();
        let common = |key, default: Exact, is_listed: bool, list: &str| match table.get(key) {
            Some(entry) if is_listed => {
                let what = format!("{key} stands beside {list}: give one of the two");
                Err(entry.place(Error::conflict(what)))
            }
            Some(entry) => each(entry, |entry| entry.number().map(Some)),
            None => Ok(vec![(!is_listed).then_some(default)]),
        };
        let listed = graph.is_some_and(|graph| graph.couplings().is_some());
        let couplings = common("coupling", Exact::one(), listed, "couplings listed edge by edge")?;
        let listed = graph.is_some_and(|graph| graph.fields().is_some());
        let fields = common("field", Exact::zero(), listed, "fields listed site by site")?;
        let lengths = [betas.len(), couplings.len(), fields.len()];
        self.check_count(&lengths, table)?;

        let mut models = Vec::with_capacity(lengths.iter().product());
        for beta in &betas {
            for coupling in &couplings {
                for field in &fields {
                    models.push(Model::Ising {
                        beta: beta.clone(),
                        coupling: coupling.clone(),
                        field: field.clone(),
                    });
                }
            }
        }
        Ok(models)
    }

    fn gas_models(&self, table: Table<'_>) -> Result<Vec<Model>> {
        let activities = each(
            table.need("activity", "a number of at least 0, or a list of them")?,
            |entry| {
                let activity = entry.number()?;
                if activity.is_negative() {
                    return Err(entry.wrong("an activity of at least 0"));
                }
                Ok(Model::LatticeGas { activity })
            },
        )?;
        self.check_count(&[activities.len()], table)?;
        Ok(activities)
    }

    fn check_count(&self, lengths: &[usize], table: Table<'_>) -> Result<()> {
        let more = lengths
            .iter()
            .fold(1, |product: usize, length| product.saturating_mul(*length));
        let count = self.ensembles.len().saturating_add(more);
        if count > MOST_ENSEMBLES {
            let fault = Error::too_large("ensembles of the plan after the grid", count, MOST_ENSEMBLES);
            return Err(fault.at_line(table.line()));
        }
        Ok(())
    }

    fn lattice(&mut self, entry: Entry<'_>) -> Result<Place> {
        let table = entry.table("a table with the key \"kind\"")?;
        let kinds = "hypercubic, triangular, honeycomb or graph";
        let kind = table.need("kind", kinds)?;
        let word = kind.text(kinds)?;
        if word == "graph" {
            table.only(&GRAPH_KEYS)?;
            let edges = table.need("edges", "the name of a CSV file with two site labels a row")?;
            let edges = self.file(edges)?;
            let sites = table.get("sites").map(|entry| self.file(entry)).transpose()?;
            let graph = self.graph(edges, sites).map_err(|error| table.place(error))?;
            return Ok(Place {
                lattice: Lattice::Graph(graph.graph.clone()),
                graph: Some(graph),
            });
        }
        let kind = Kind::from_word(word).ok_or_else(|| kind.wrong(kinds))?;
        table.only(&REGULAR_KEYS)?;
        let expected = "a list of whole numbers, one for each axis";
        let extents = table.need("extents", expected)?;
        let items = extents.items().ok_or_else(|| extents.wrong(expected))?;
        let extents = items
            .iter()
            .map(|item| item.whole(1..=u64::MAX))
            .collect::<Result<Vec<_>>>()?;
        let boundary = match table.get("boundary") {
            None => vec![Boundary::Periodic; extents.len()],
            Some(entry) => match entry.items() {
                None => vec![boundary(entry)?; extents.len()],
                Some(words) => words.into_iter().map(boundary).collect::<Result<_>>()?,
            },
        };
        let regular = Regular::new(kind, extents, boundary).map_err(|error| table.place(error))?;
        Ok(Place {
            lattice: Lattice::Regular(regular),
            graph: None,
        })
    }

    fn graph(&mut self, edges: usize, sites: Option<usize>) -> Result<Arc<LabelledGraph>> {
        let edges = &self.files[edges];
        let sites = sites.map(|sites| &self.files[sites]);
        let names = (edges.name.clone(), sites.map(|file| file.name.clone()));
        if let Some(graph) = self.graphs.get(&names) {
            return Ok(graph.clone());
        }
        let graph = Arc::new(read_graph(edges, sites)?);
        self.graphs.insert(names, graph.clone());
        Ok(graph)
    }

    /// The place in `files` of the file that `entry` names, read at its first use.
    fn file(&mut self, entry: Entry<'_>) -> Result<usize> {
        let name = entry.text("the name of a file")?;
        check_file_name(name).map_err(|error| entry.place(error))?;
        if let Some(place) = self.names.get(name) {
            return Ok(*place);
        }
        if let Some(other) = self.names.keys().find(|other| collide(name, other)) {
            let what =
                format!("{name} and {other} cannot stand in one archive: they differ by case, or one is a folder");
            return Err(entry.place(Error::conflict(what)));
        }
        let bytes = (self.read_file)(name).map_err(|error| match error.location().path {
            // the plan's line would be taken for a line of the file that the fault names
            Some(_) => error.at_field(format!("{} on line {} of the plan", entry.key(), entry.line())),
            None => error
                .at_field(format!("{} {name:?}", entry.key()))
                .at_line(entry.line()),
        })?;
        if bytes.len() as u64 > LARGEST_FILE {
            return Err(entry.place(Error::too_large(format!("bytes of {name}"), bytes.len(), LARGEST_FILE)));
        }
        let place = self.files.len();
        self.files.push(InputFile {
            name: name.to_string(),
            bytes,
        });
        self.names.insert(name.to_string(), place);
        Ok(place)
    }
}

/// Whether two file names fall together where case does not count, or one is a folder of the other.
fn collide(one: &str, other: &str) -> bool {
    let folded = |name: &str| name.to_ascii_lowercase() + "/";
    let (one, other) = (folded(one), folded(other));
    one.starts_with(&other) || other.starts_with(&one)
}

/// The value of a parameter, or all values of a list.
fn each<T>(entry: Entry<'_>, read: impl Fn(Entry<'_>) -> Result<T>) -> Result<Vec<T>> {
    match entry.items() {
        None => Ok(vec![read(entry)?]),
        Some(items) if items.is_empty() => Err(entry.wrong("at least one number")),
        Some(items) => items.into_iter().map(read).collect(),
    }
}

fn beta(entry: Entry<'_>, lattice: &Lattice) -> Result<Beta> {
    if entry.word() != Some("critical") {
        return entry.number().map(Beta::Number);
    }
    Critical::of(lattice).map(Beta::Critical).ok_or_else(|| {
        let known = "square, triangular and honeycomb lattices";
        entry.wrong(format!("a number: the exact critical point is known for {known} only"))
    })
}

fn inverse(entry: Entry<'_>) -> Result<Beta> {
    if entry.word() == Some("critical") {
        return Err(entry.wrong("a number; the critical point is written beta = \"critical\""));
    }
    let beta = entry.number()?.inverse();
    beta.map(Beta::Number)
        .ok_or_else(|| entry.wrong("a temperature other than 0"))
}

fn boundary(entry: Entry<'_>) -> Result<Boundary> {
    let expected = "periodic, free, plus or minus";
    Boundary::from_word(entry.text(expected)?).ok_or_else(|| entry.wrong(expected))
}

/// The parameters of a model in the order of the grid, for messages.
fn point(model: &Model) -> String {
    let shorter = |number: &dyn std::fmt::Display| shown(&number.to_string()).replace('"', "");
    match model {
        Model::Ising { beta, coupling, field } => {
            let mut point = format!("beta {}", shorter(beta));
            for (name, number) in [("coupling", coupling), ("field", field)] {
                if let Some(number) = number {
                    point += &format!(", {name} {}", shorter(number));
                }
            }
            point
        }
        Model::LatticeGas { activity } => format!("activity {}", shorter(activity)),
    }
}
