//! The law of an ensemble: what its samples are distributed as, and its key (`STREAM.md` §4, §10).
//!
//! A law is data. Its JSON object has exactly the fields of its row in the definition, and its key
//! is the digest of that object, so two laws with equal objects are one law. Only the closed forms
//! of critical points are known here by name; how a threshold is computed is `threshold`'s matter.

use std::fmt;
use std::sync::Arc;

use serde::Deserialize;
use serde_json::{Value, json};

use crate::canonical;
use crate::error::{Error, ErrorKind, Result};
use crate::lattice::{Boundary, Graph, Kind, Lattice, Regular, Spin};
use crate::number::Exact;
use crate::quantity::Digest;
use crate::sample::Configuration;

/// The critical couplings known in closed form (`STREAM.md` §10).
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub enum Critical {
    /// Square: ln(1 + sqrt 2)/2 (Kramers and Wannier 1941, Onsager 1944).
    Square,
    /// Triangular: ln(3)/4 (Houtappel 1950).
    Triangular,
    /// Honeycomb: ln(2 + sqrt 3)/2 (Houtappel 1950).
    Honeycomb,
}

impl Critical {
    /// The closed form for `lattice`, if one is known.
    pub fn of(lattice: &Lattice) -> Option<Self> {
        let Lattice::Regular(regular) = lattice else {
            return None;
        };
        match regular.kind() {
            Kind::Hypercubic => (regular.extents().len() == 2).then_some(Self::Square),
            Kind::Triangular => Some(Self::Triangular),
            Kind::Honeycomb => Some(Self::Honeycomb),
        }
    }

    /// The formula and the names of those who found it, for people.
    pub fn formula(self) -> &'static str {
        match self {
            Self::Square => "ln(1 + sqrt 2)/2",
            Self::Triangular => "ln(3)/4",
            Self::Honeycomb => "ln(2 + sqrt 3)/2",
        }
    }
}

/// The inverse temperature of an Ising law.
#[derive(Clone, PartialEq, Eq, Debug)]
pub enum Beta {
    /// A number as typed.
    Number(Exact),
    /// The word "critical": the closed form, never a rounded number.
    Critical(Critical),
}

/// The two-state site laws.
#[derive(Clone, PartialEq, Eq, Debug)]
pub enum Model {
    /// Weight exp(-beta E), E = -sum J s s - sum h s. `None`: listed edge by edge or site by site.
    Ising {
        /// Inverse temperature.
        beta: Beta,
        /// The coupling J of all edges.
        coupling: Option<Exact>,
        /// The field h of all sites.
        field: Option<Exact>,
    },
    /// Weight z^(occupied sites), no two neighbours occupied.
    LatticeGas {
        /// The activity z.
        activity: Exact,
    },
}

/// Sites whose value is given, by increasing number: samples are conditional on them.
#[derive(Clone, PartialEq, Eq, Debug)]
pub struct Held {
    sites: Vec<(u32, Spin)>,
    /// Of the list; kept because every law of a grid names it.
    digest: Digest,
}

/// A complete law: model, lattice, held sites.
#[derive(Clone, PartialEq, Eq, Debug)]
pub struct Law {
    model: Model,
    lattice: Lattice,
    held: Option<Arc<Held>>,
}

/// How the numbers U of a law are handed out (`STREAM.md` §3).
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub enum Digits {
    /// Digit by digit for a whole group.
    Sliced,
    /// Two words a lane.
    Plain,
}

impl Held {
    /// Held sites in any order; each site once.
    ///
    /// # Errors
    /// [`ErrorKind::Value`] for an empty list, [`ErrorKind::Conflict`] for a site held twice.
    pub fn new(mut sites: Vec<(u32, Spin)>) -> Result<Self> {
        if sites.is_empty() {
            return Err(Error::value("no held site", "at least one, or no list of held sites"));
        }
        sites.sort_unstable();
        if let Some(pair) = sites.windows(2).find(|pair| pair[0].0 == pair[1].0) {
            return Err(Error::conflict(format!("site {} is held twice", pair[0].0)));
        }
        let digest = canonical::digest(&held_json(&sites))?;
        Ok(Self { sites, digest })
    }

    /// The held sites by increasing number.
    pub fn sites(&self) -> &[(u32, Spin)] {
        &self.sites
    }

    /// The list of pairs `[site, value]` of `STREAM.md` §10.
    pub fn to_json(&self) -> Value {
        held_json(&self.sites)
    }

    /// The held sites of such a list, which must be increasing.
    ///
    /// # Errors
    /// [`ErrorKind::Syntax`] if it is no such list; otherwise as [`Held::new`].
    pub fn from_json(value: &Value) -> Result<Self> {
        let fault = |what: String| Error::from(ErrorKind::Syntax { format: "JSON", what });
        let pairs: Vec<(u32, i64)> =
            Deserialize::deserialize(value).map_err(|error: serde_json::Error| fault(error.to_string()))?;
        if !pairs.windows(2).all(|pair| pair[0].0 < pair[1].0) {
            return Err(fault("held sites are not in increasing order".into()));
        }
        let sites = pairs.into_iter().map(|(site, value)| {
            let spin = Spin::from_value(value).ok_or_else(|| Error::value(value, "-1 or 1"))?;
            Ok((site, spin))
        });
        Self::new(sites.collect::<Result<_>>()?)
    }

    /// The SHA-256 of the canonical JSON of [`Held::to_json`].
    ///
    /// # Errors
    /// None: it was computed when the list was made.
    pub fn digest(&self) -> Result<Digest> {
        Ok(self.digest)
    }
}

fn held_json(sites: &[(u32, Spin)]) -> Value {
    sites.iter().map(|(site, spin)| json!([site, spin.value()])).collect()
}

impl Law {
    /// A law, if its parts go together.
    ///
    /// # Errors
    /// [`ErrorKind::Conflict`] or [`ErrorKind::Value`], with the field: listed couplings or fields beside
    /// a common one, neither of both, a negative activity, held values of weight zero, a critical
    /// point that is not known.
    pub fn new(model: Model, lattice: Lattice, held: Option<Arc<Held>>) -> Result<Self> {
        let graph = lattice.graph();
        let listed_couplings = graph.is_some_and(|graph| graph.couplings().is_some());
        let listed_fields = graph.is_some_and(|graph| graph.fields().is_some());
        match &model {
            Model::Ising { beta, coupling, field } => {
                one_of(
                    coupling.is_some(),
                    listed_couplings,
                    "coupling",
                    "couplings listed edge by edge",
                )?;
                one_of(field.is_some(), listed_fields, "field", "fields listed site by site")?;
                if let Beta::Critical(critical) = beta {
                    if Critical::of(&lattice) != Some(*critical) {
                        return Err(no_critical_point().at_field("beta"));
                    }
                }
            }
            Model::LatticeGas { activity } => {
                if listed_couplings || listed_fields {
                    return Err(Error::conflict("a lattice gas has no couplings and no fields").at_field("lattice"));
                }
                if activity.is_negative() {
                    return Err(Error::value(activity, "an activity of at least 0").at_field("activity"));
                }
            }
        }
        let law = Self { model, lattice, held };
        law.check_held()?;
        Ok(law)
    }

    fn check_held(&self) -> Result<()> {
        let Some(held) = &self.held else { return Ok(()) };
        let sites = self.lattice.sites();
        if let Some((site, _)) = held.sites.iter().find(|(site, _)| *site >= sites) {
            return Err(Error::value(format!("held site {site}"), format!("sites below {sites}")).at_field("held"));
        }
        let mut values = vec![false; sites as usize];
        for (site, spin) in &held.sites {
            values[*site as usize] = spin.bit();
        }
        // every site that is not held may be empty, so the held ones alone decide
        match self.weight_zero(&Configuration::pack(&values)) {
            Some(what) => Err(Error::conflict(format!("held values have weight zero: {what}")).at_field("held")),
            None => Ok(()),
        }
    }

    /// Why a sample cannot be one of this law, if its weight is zero: a held value is not kept, or two
    /// neighbours are occupied.
    pub fn weight_zero(&self, sample: &Configuration) -> Option<String> {
        let held = self.held.iter().flat_map(|held| &held.sites);
        for (site, spin) in held {
            if sample.is_plus(*site) != spin.bit() {
                return Some(format!(
                    "site {site} is held at {}, the sample has {}",
                    spin.value(),
                    -spin.value()
                ));
            }
        }
        let Model::LatticeGas { activity } = &self.model else {
            return None;
        };
        if activity.is_zero() && sample.count_plus() > 0 {
            return Some("a site is occupied at activity 0".into());
        }
        let both = |[a, b]: &[u32; 2]| sample.is_plus(*a) && sample.is_plus(*b);
        if let Some([a, b]) = self.lattice.edges().find(both) {
            return Some(format!("the neighbours {a} and {b} are both occupied"));
        }
        let mut frozen = self.lattice.frozen();
        let frozen = frozen.find(|(site, spin)| spin.bit() && sample.is_plus(*site));
        frozen.map(|(site, _)| format!("site {site} is occupied beside an occupied boundary"))
    }

    /// The model with its parameters.
    pub fn model(&self) -> &Model {
        &self.model
    }

    /// The lattice.
    pub fn lattice(&self) -> &Lattice {
        &self.lattice
    }

    /// The held sites.
    pub fn held(&self) -> Option<&Arc<Held>> {
        self.held.as_ref()
    }

    /// How the digits of U are handed out.
    pub fn digits(&self) -> Digits {
        match &self.model {
            Model::Ising {
                coupling: Some(_),
                field: Some(_),
                ..
            }
            | Model::LatticeGas { .. } => Digits::Sliced,
            Model::Ising { .. } => Digits::Plain,
        }
    }

    /// The word of the law in plans and records.
    pub fn word(&self) -> &'static str {
        match self.model {
            Model::Ising { .. } => "ising",
            Model::LatticeGas { .. } => "lattice-gas",
        }
    }

    /// The law object of `STREAM.md` §10.
    ///
    /// # Errors
    /// Those of [`canonical::digest`].
    pub fn to_json(&self) -> Result<Value> {
        let held = self.held.as_ref().map(|held| held.digest()).transpose()?;
        let lattice = self.lattice.to_json()?;
        let (law, map, protocol) = (self.word(), "site heat bath", "doubling");
        Ok(match &self.model {
            Model::Ising { beta, coupling, field } => json!({
                "law": law, "map": map, "protocol": protocol, "lattice": lattice, "held": held,
                "beta": beta.to_string(), "coupling": coupling, "field": field,
            }),
            Model::LatticeGas { activity } => json!({
                "law": law, "map": map, "protocol": protocol, "lattice": lattice, "held": held,
                "activity": activity,
            }),
        })
    }

    /// The law that a record's object states, with the graph and the held sites that it names by digest.
    ///
    /// # Errors
    /// [`ErrorKind::Syntax`], [`ErrorKind::Unsupported`] for a law this program does not know,
    /// [`ErrorKind::Conflict`] if graph or held sites have another digest than the object says.
    pub fn from_json(value: &Value, graph: Option<Arc<Graph>>, held: Option<Arc<Held>>) -> Result<Self> {
        if let Some(law) = value["law"].as_str().filter(|law| !KNOWN_LAWS.contains(law)) {
            let what = format!("law {law:?}, known: {}", KNOWN_LAWS.join(", "));
            return Err(ErrorKind::Unsupported { what }.into());
        }
        let object: LawObject = Deserialize::deserialize(value).map_err(syntax)?;
        let (LawObject::Ising(
            Common {
                map,
                protocol,
                lattice: lattice_value,
                held: held_digest,
            },
            _,
        )
        | LawObject::LatticeGas(
            Common {
                map,
                protocol,
                lattice: lattice_value,
                held: held_digest,
            },
            _,
        )) = &object;
        if map != "site heat bath" || protocol != "doubling" {
            let what =
                format!("random map {map:?} with protocol {protocol:?}, known: \"site heat bath\" with \"doubling\"");
            return Err(ErrorKind::Unsupported { what }.into());
        }
        let held_fault = match (held_digest, &held) {
            (None, None) => None,
            (Some(_), None) => Some(Error::missing(
                "the list of held sites",
                "that which the law names by digest",
            )),
            (None, Some(_)) => Some(Error::conflict("held sites stand beside a law that names none")),
            (Some(digest), Some(held)) => (held.digest()? != *digest)
                .then(|| Error::conflict("the held sites have another digest than the law states")),
        };
        if let Some(fault) = held_fault {
            return Err(fault.at_field("held"));
        }
        let lattice = lattice_from_json(lattice_value, graph).map_err(|error| error.at_field("lattice"))?;
        let model = match object {
            LawObject::Ising(_, IsingFields { beta, coupling, field }) => {
                let beta = if beta == "critical" {
                    Beta::Critical(Critical::of(&lattice).ok_or_else(|| no_critical_point().at_field("beta"))?)
                } else {
                    Beta::Number(Exact::parse_canonical(&beta).map_err(|error| error.at_field("beta"))?)
                };
                Model::Ising { beta, coupling, field }
            }
            LawObject::LatticeGas(_, GasFields { activity }) => Model::LatticeGas { activity },
        };
        Self::new(model, lattice, held)
    }

    /// The key: the SHA-256 of the law object in canonical JSON.
    ///
    /// # Errors
    /// Those of [`canonical::digest`].
    pub fn key(&self) -> Result<Digest> {
        canonical::digest(&self.to_json()?)
    }
}

fn one_of(common: bool, listed: bool, name: &str, list: &str) -> Result<()> {
    match (common, listed) {
        (true, true) => Err(Error::conflict(format!("{name} is given beside {list}")).at_field(name)),
        (false, false) => Err(Error::missing(name, format!("a number, or {list}")).at_field(name)),
        _ => Ok(()),
    }
}

fn no_critical_point() -> Error {
    Error::value(
        "\"critical\"",
        "a number: the exact critical point is known for square, triangular and honeycomb lattices",
    )
}

fn syntax(error: serde_json::Error) -> Error {
    ErrorKind::Syntax {
        format: "JSON",
        what: error.to_string(),
    }
    .into()
}

struct Common {
    map: String,
    protocol: String,
    lattice: Value,
    held: Option<Digest>,
}

struct IsingFields {
    beta: String,
    coupling: Option<Exact>,
    field: Option<Exact>,
}

struct GasFields {
    activity: Exact,
}

/// The laws of `STREAM.md` §10 that this program knows.
const KNOWN_LAWS: [&str; 2] = ["ising", "lattice-gas"];

/// The rows of the table in `STREAM.md` §10 that this program knows.
enum LawObject {
    Ising(Common, IsingFields),
    LatticeGas(Common, GasFields),
}

impl<'de> Deserialize<'de> for LawObject {
    fn deserialize<D: serde::Deserializer<'de>>(deserializer: D) -> Result<Self, D::Error> {
        use serde::de::Error as _;
        let Value::Object(mut fields) = Value::deserialize(deserializer)? else {
            return Err(D::Error::custom("a law is an object"));
        };
        let mut take = |name: &'static str| fields.remove(name).ok_or_else(|| D::Error::missing_field(name));
        let text = |value: Value| match value {
            Value::String(text) => Ok(text),
            other => Err(D::Error::custom(format!("found {other}, expected a text"))),
        };
        let law = text(take("law")?)?;
        let common = Common {
            map: text(take("map")?)?,
            protocol: text(take("protocol")?)?,
            lattice: take("lattice")?,
            held: serde_json::from_value(take("held")?).map_err(D::Error::custom)?,
        };
        let object = match law.as_str() {
            "ising" => Self::Ising(
                common,
                IsingFields {
                    beta: text(take("beta")?)?,
                    coupling: serde_json::from_value(take("coupling")?).map_err(D::Error::custom)?,
                    field: serde_json::from_value(take("field")?).map_err(D::Error::custom)?,
                },
            ),
            "lattice-gas" => Self::LatticeGas(
                common,
                GasFields {
                    activity: serde_json::from_value(take("activity")?).map_err(D::Error::custom)?,
                },
            ),
            other => return Err(D::Error::custom(format!("unknown law {other:?}"))),
        };
        match fields.keys().next() {
            None => Ok(object),
            Some(name) => Err(D::Error::custom(format!("unknown field {name:?}"))),
        }
    }
}

fn lattice_from_json(value: &Value, graph: Option<Arc<Graph>>) -> Result<Lattice> {
    #[derive(Deserialize)]
    #[serde(deny_unknown_fields)]
    struct RegularObject {
        kind: String,
        extents: Vec<u64>,
        boundary: Vec<String>,
    }
    #[derive(Deserialize)]
    #[serde(deny_unknown_fields)]
    struct GraphObject {
        #[serde(rename = "kind")]
        _kind: String,
        sites: u64,
        edges: u64,
        sha256: Digest,
    }
    if value.get("kind").and_then(Value::as_str) == Some("graph") {
        let object: GraphObject = Deserialize::deserialize(value).map_err(syntax)?;
        let graph = graph.ok_or_else(|| Error::missing("the graph", "the edges that the law names by digest"))?;
        if u64::from(graph.sites()) != object.sites
            || graph.edges().len() as u64 != object.edges
            || graph.digest()? != object.sha256
        {
            return Err(Error::conflict("the graph is another one than the law states"));
        }
        return Ok(Lattice::Graph(graph));
    }
    if graph.is_some() {
        return Err(Error::conflict("a graph stands beside a regular lattice"));
    }
    let object: RegularObject = Deserialize::deserialize(value).map_err(syntax)?;
    let kind = Kind::from_word(&object.kind).ok_or_else(|| {
        Error::value(
            format!("{:?}", object.kind),
            "hypercubic, triangular, honeycomb or graph",
        )
    })?;
    let boundary = object.boundary.iter().map(|word| {
        Boundary::from_word(word).ok_or_else(|| Error::value(format!("{word:?}"), "periodic, free, plus or minus"))
    });
    Ok(Lattice::Regular(Regular::new(
        kind,
        object.extents,
        boundary.collect::<Result<_>>()?,
    )?))
}

impl fmt::Display for Beta {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Self::Number(number) => number.fmt(f),
            Self::Critical(_) => f.write_str("critical"),
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// `tests/vectors/laws.json`, made by an independent program.
    #[test]
    fn law_objects_and_keys_are_the_known_ones() {
        let vectors: Value = serde_json::from_str(include_str!("../tests/vectors/laws.json")).unwrap();
        let graph = Arc::new(Graph::from_json(&vectors["graph"], 3).unwrap());
        assert_eq!(graph.digest().unwrap().to_string(), vectors["graph_sha256"]);
        let held = Arc::new(Held::from_json(&vectors["held"]).unwrap());
        assert_eq!(held.digest().unwrap().to_string(), vectors["held_sha256"]);
        let mut seen = 0;
        for case in vectors["laws"].as_array().unwrap() {
            let canonical = case["canonical"].as_str().unwrap();
            let object = canonical::parse(canonical.as_bytes()).unwrap();
            if object["map"] != "site heat bath" {
                assert!(Law::from_json(&object, None, None).is_err(), "{}", case["what"]);
                continue;
            }
            let graph = (object["lattice"]["kind"] == "graph").then(|| graph.clone());
            let held = (!object["held"].is_null()).then(|| held.clone());
            let law = Law::from_json(&object, graph, held).unwrap();
            assert_eq!(
                String::from_utf8(canonical::to_bytes(&law.to_json().unwrap()).unwrap()).unwrap(),
                canonical
            );
            assert_eq!(law.key().unwrap().to_string(), case["key"]);
            seen += 1;
        }
        assert_eq!(seen, 5);
    }

    #[test]
    fn laws_that_make_no_sense_are_refused() {
        let square = |extent| {
            Lattice::Regular(Regular::new(Kind::Hypercubic, vec![extent; 2], vec![Boundary::Periodic; 2]).unwrap())
        };
        let gas = |activity: &str| Model::LatticeGas {
            activity: Exact::parse(activity).unwrap(),
        };
        let held = |sites: &[u32]| {
            Some(Arc::new(
                Held::new(sites.iter().map(|site| (*site, Spin::Plus)).collect()).unwrap(),
            ))
        };
        assert!(Law::new(gas("-1"), square(4), None).is_err());
        assert!(
            Law::new(gas("1"), square(4), held(&[0, 1]))
                .unwrap_err()
                .to_string()
                .contains("weight zero")
        );
        assert!(
            Law::new(gas("0"), square(4), held(&[0]))
                .unwrap_err()
                .to_string()
                .contains("weight zero")
        );
        assert!(Law::new(gas("1"), square(4), held(&[0, 2])).is_ok());
        assert!(Law::new(gas("1"), square(4), held(&[16])).is_err());
        let chain = Lattice::Regular(Regular::new(Kind::Hypercubic, vec![4], vec![Boundary::Plus]).unwrap());
        assert!(
            Law::new(gas("1"), chain.clone(), held(&[0]))
                .unwrap_err()
                .to_string()
                .contains("boundary")
        );
        let ising = |beta| Model::Ising {
            beta,
            coupling: Some(Exact::one()),
            field: Some(Exact::zero()),
        };
        assert!(Law::new(ising(Beta::Critical(Critical::Square)), chain, None).is_err());
        let graph = |couplings| Lattice::Graph(Arc::new(Graph::new(2, vec![[0, 1]], couplings, None).unwrap()));
        assert!(Law::new(ising(Beta::Number(Exact::one())), graph(Some(vec![Exact::one()])), None).is_err());
        assert!(Held::new(vec![(1, Spin::Plus), (1, Spin::Minus)]).is_err());
        assert!(Held::new(vec![]).is_err());
    }
}
