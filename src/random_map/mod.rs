//! The random map of the site laws: who is decided when, against which thresholds (`STREAM.md` §4).
//!
//! A [`RandomMap`] is everything that an engine needs beside the words: the colour classes in which
//! sites are decided, the far ends of each site's edges, and the table of thresholds. It is computed
//! from the law alone, with exact numbers, and its thresholds are what an archive stores. It keeps a
//! few bits for each site of a regular lattice; whoever needs lists makes them.

mod adjacency;
mod class;
mod labels;
mod profile;

use std::collections::{BTreeMap, VecDeque};
use std::sync::Arc;

use crate::error::Result;
use crate::lattice::{Neighbour, Spin};
use crate::law::{Digits, Held, Law};
use crate::number::Exact;
use crate::threshold::{self, Threshold};

use adjacency::Adjacency;
use labels::Labels;
use profile::{Numbers, Profile, Surroundings};

pub use class::Class;
pub use profile::MOST_THRESHOLDS;

/// The far end of an edge of a site that is itself decided by the map.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub struct End {
    /// The neighbour.
    pub site: u32,
    /// What it adds to the site's load: `weight` where it is +1, `-weight` where it is -1
    /// (lattice gas: 1 where it is occupied).
    pub weight: i128,
    /// Whether the threshold grows with the neighbour's value.
    pub rising: bool,
}

/// The random map of a law.
#[derive(Debug)]
pub struct RandomMap {
    digits: Digits,
    gas: bool,
    sites: u32,
    classes: Vec<Class>,
    held: Option<Arc<Held>>,
    held_at: HeldAt,
    adjacency: Adjacency,
    profiles: Vec<Profile>,
    profile_of: Labels,
    thresholds: BTreeMap<Exact, Threshold>,
}

/// Which sites are held, and at which value.
#[derive(Debug)]
struct HeldAt(Labels);

impl HeldAt {
    fn of(law: &Law) -> Self {
        let mut labels = Labels::new(law.lattice().sites() as usize);
        for (site, spin) in law.held().map_or(&[][..], |held| held.sites()) {
            labels.set(*site as usize, 1 + u32::from(spin.bit()));
        }
        Self(labels)
    }

    fn get(&self, site: u32) -> Option<Spin> {
        let label = self.0.get(site as usize).checked_sub(1)?;
        Some(Spin::from_bit(label == 1))
    }
}

impl RandomMap {
    /// The map of `law`.
    ///
    /// # Errors
    /// [`crate::error::ErrorKind::TooLarge`] for more than [`MOST_THRESHOLDS`] distinct thresholds, naming the site
    /// with most neighbours, or for couplings at one site without a usable common denominator.
    pub fn new(law: &Law) -> Result<Self> {
        let sites = law.lattice().sites();
        let numbers = Numbers::of(law);
        let adjacency = Adjacency::of(law.lattice(), |edge| numbers.coupling_of(edge));
        let held_at = HeldAt::of(law);

        let mut colours = Colours::new(sites);
        let mut shared = Shared::new(sites);
        let mut seen = Surroundings::default();
        for site in (0..sites).filter(|site| held_at.get(*site).is_none()) {
            seen.field = numbers.field_of(site as usize);
            seen.fixed.clear();
            seen.moving.clear();
            for (neighbour, coupling) in adjacency.neighbours(site) {
                let fixed = match neighbour {
                    Neighbour::Site(far) => held_at.get(far),
                    Neighbour::Frozen(spin) => Some(spin),
                };
                match (fixed, neighbour) {
                    (None, Neighbour::Site(far)) => {
                        seen.moving.push((coupling, 1));
                        if far < site {
                            colours.exclude(far);
                        }
                    }
                    (Some(spin), _) => seen.fixed.push((coupling, numbers.value(spin))),
                    (None, Neighbour::Frozen(_)) => {}
                }
            }
            colours.give(site);
            seen.add_up();
            shared.put(site, &seen);
        }
        let classes = Class::of_colours(sites, &colours.of, &colours.lanes);
        let (list, profile_of) = shared.finish();
        let crowded = || {
            let mut degree = vec![0u32; sites as usize];
            law.lattice()
                .edges()
                .flatten()
                .for_each(|site| degree[site as usize] += 1);
            let most = (0..sites).max_by_key(|site| (degree[*site as usize], std::cmp::Reverse(*site)));
            let site = most.unwrap_or(0);
            format!("site {site} has most neighbours: {}", degree[site as usize])
        };
        let (profiles, thresholds) = profile::profiles(law, &numbers, &list, crowded)?;
        Ok(Self {
            digits: law.digits(),
            gas: numbers.gas,
            sites,
            classes,
            held: law.held().cloned(),
            held_at,
            adjacency,
            profiles,
            profile_of,
            thresholds,
        })
    }

    /// How digits are handed out.
    pub fn digits(&self) -> Digits {
        self.digits
    }

    /// The number of sites, held ones included.
    pub fn sites(&self) -> u32 {
        self.sites
    }

    /// The lists of a sweep: the colour classes.
    pub fn classes(&self) -> &[Class] {
        &self.classes
    }

    /// The number of lanes of one sweep.
    pub fn lanes(&self) -> u64 {
        u64::from(self.sites) - self.held().len() as u64
    }

    /// The held sites with their values.
    pub fn held(&self) -> &[(u32, Spin)] {
        self.held.as_ref().map_or(&[], |held| held.sites())
    }

    /// The far ends of the edges of `site` that move; none for a held site.
    pub fn ends(&self, site: u32) -> impl Iterator<Item = End> + '_ {
        let moves = |site| self.held_at.get(site).is_none();
        let profile = moves(site).then(|| self.profile_at(site));
        let neighbours = self.adjacency.neighbours(site);
        neighbours.filter_map(move |(neighbour, coupling)| match neighbour {
            Neighbour::Site(far) if moves(far) => {
                let pulls = &profile?.pulls;
                let at = pulls.binary_search_by_key(&coupling, |pull| pull.coupling).ok()?;
                Some(End {
                    site: far,
                    weight: pulls[at].weight,
                    rising: pulls[at].rising,
                })
            }
            _ => None,
        })
    }

    /// How many profiles there are.
    pub fn profiles(&self) -> u32 {
        u32::try_from(self.profiles.len()).unwrap_or(u32::MAX)
    }

    /// The number of the profile of `site`. Sites of one profile see the same: they are asked the same thresholds
    /// and get the same one from equal sums of the weights at their ends. A held site has none, and gets 0.
    pub fn profile(&self, site: u32) -> u32 {
        self.profile_of.get(site as usize)
    }

    fn profile_at(&self, site: u32) -> &Profile {
        &self.profiles[self.profile(site) as usize]
    }

    /// Whether the law is a lattice gas: any number of occupied neighbours is one load.
    pub fn is_gas(&self) -> bool {
        self.gas
    }

    /// Every load that can occur at `site`, increasing, with its threshold. That of an Ising site is its local field
    /// in units of its own; that of a gas is 0 or 1, for no and any occupied neighbour.
    pub fn table(&self, site: u32) -> &[(i128, Threshold)] {
        &self.profile_at(site).table
    }

    /// The distinct thresholds that `site` could ever be asked, increasing.
    pub fn asked(&self, site: u32) -> &[Threshold] {
        &self.profile_at(site).asked
    }

    /// The threshold of `site` when the far end of each of its edges has the value that `far` gives.
    pub fn threshold(&self, site: u32, far: impl Fn(&End) -> bool) -> Threshold {
        self.threshold_among(site, self.ends(site), far)
    }

    /// The same, for a caller who has the ends of `site` at hand.
    ///
    /// # Panics
    /// If `ends` are not those of `site`: its table holds every load that can occur, and no other.
    pub fn threshold_among(
        &self,
        site: u32,
        ends: impl IntoIterator<Item = End>,
        far: impl Fn(&End) -> bool,
    ) -> Threshold {
        let profile = self.profile_at(site);
        let ends = ends.into_iter();
        let load = if self.gas {
            (profile.base + ends.map(|end| i128::from(far(&end))).sum::<i128>()).min(1)
        } else {
            profile.base
                + ends
                    .map(|end| if far(&end) { end.weight } else { -end.weight })
                    .sum::<i128>()
        };
        let at = profile
            .table
            .binary_search_by_key(&load, |(load, _)| *load)
            .expect("a table holds every load");
        profile.table[at].1
    }

    /// Every local field that can occur in the law (lattice gas: 0 and 1, for no and any occupied neighbour),
    /// increasing, with its threshold.
    pub fn thresholds(&self) -> &BTreeMap<Exact, Threshold> {
        &self.thresholds
    }

    /// Whether flipping the meaning of some sites makes every threshold grow with every neighbour: then
    /// the bounds are the two extremal chains. Otherwise the law is frustrated and they only enclose
    /// the true states.
    pub fn is_ordered(&self) -> bool {
        let pulls = || self.profiles.iter().flat_map(|profile| &profile.pulls);
        let (mut rising, mut falling) = (false, false);
        for pull in pulls().filter(|pull| pull.weight != 0) {
            *(if pull.rising { &mut rising } else { &mut falling }) = true;
        }
        // no site is flipped, or those of one of two classes
        if !falling || !rising && self.classes.len() <= 2 {
            return true;
        }
        // 0 not met yet, 1 as it is, 2 flipped; site by site outwards, so that few wait
        let mut flipped = Labels::new(self.sites as usize);
        let mut open = VecDeque::new();
        for start in 0..self.sites {
            if flipped.get(start as usize) != 0 {
                continue;
            }
            flipped.set(start as usize, 1);
            open.push_back(start);
            while let Some(site) = open.pop_front() {
                let own = flipped.get(site as usize);
                for end in self.ends(site).filter(|end| end.weight != 0) {
                    let wanted = if end.rising { own } else { 3 - own };
                    match flipped.get(end.site as usize) {
                        0 => {
                            flipped.set(end.site as usize, wanted);
                            open.push_back(end.site);
                        }
                        found if found != wanted => return false,
                        _ => {}
                    }
                }
            }
        }
        true
    }

    /// An upper bound on how many neighbours one unknown site can make unknown in a sweep, for the
    /// worst site: the sum over its edges of the largest change of probability that the far end can
    /// make. Below 1 the bounds meet fast (contraction; Dobrushin 1970, from memory). A rough figure
    /// for advice before a run, never used in a sample.
    pub fn spread(&self) -> f64 {
        let unit = |threshold: Threshold| match threshold {
            Threshold::Below(theta) => theta as f64 / 2f64.powi(128),
            Threshold::Certain => 1.0,
        };
        let spread = |profile: &Profile| {
            let step = |weight: i128| {
                let apart = if self.gas { 1 } else { 2 * weight.abs() };
                let change = |(load, low): &(i128, Threshold)| {
                    let at = profile.table.binary_search_by_key(&(load + apart), |(load, _)| *load);
                    Some((unit(profile.table[at.ok()?].1) - unit(*low)).abs())
                };
                profile.table.iter().filter_map(change).fold(0.0, f64::max)
            };
            let pulls = profile.pulls.iter();
            pulls.map(|pull| f64::from(pull.ends) * step(pull.weight)).sum()
        };
        self.profiles.iter().map(spread).fold(0.0, f64::max)
    }
}

/// Why the bounds of a law may take very long to meet, or never do.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub enum Doubt {
    /// It lies below the critical temperature: they meet only after very many sweeps.
    Cold,
    /// It is frustrated: they only enclose the true states and may stay apart.
    Frustrated,
}

impl Doubt {
    /// What is to be doubted before anything is drawn; nothing where the bounds are sure to meet fast. `map`
    /// is the map of `law`.
    pub fn of(law: &Law, map: &RandomMap) -> Option<Self> {
        if map.spread() < 1.0 {
            None
        } else if !map.is_ordered() {
            Some(Self::Frustrated)
        } else {
            threshold::is_below_critical_temperature(law).then_some(Self::Cold)
        }
    }
}

/// Greedy colouring in increasing site number (`STREAM.md` §4). Colours are counted from 1; 0 is none.
struct Colours {
    of: Labels,
    /// How many sites have each colour.
    lanes: Vec<u32>,
    /// For each colour, the number of the visit in which a neighbour was last seen to have it.
    excluded: Vec<u64>,
    visit: u64,
}

impl Colours {
    fn new(sites: u32) -> Self {
        Self {
            of: Labels::new(sites as usize),
            lanes: Vec::new(),
            excluded: Vec::new(),
            visit: 1,
        }
    }

    /// The site that is coloured next is a neighbour of `far`.
    fn exclude(&mut self, far: u32) {
        self.excluded[self.of.get(far as usize) as usize - 1] = self.visit;
    }

    /// Gives `site` the least colour that is not excluded.
    fn give(&mut self, site: u32) {
        let free = self.excluded.iter().position(|visit| *visit != self.visit);
        let class = free.unwrap_or(self.lanes.len());
        if class == self.lanes.len() {
            self.lanes.push(0);
            self.excluded.push(0);
        }
        self.lanes[class] += 1;
        self.of.set(site as usize, u32::try_from(class + 1).unwrap_or(u32::MAX));
        self.visit += 1;
    }
}

/// Surroundings by number, in the order in which they were met.
struct Shared {
    known: BTreeMap<Surroundings, u32>,
    /// Those of the last site, for most sites see what the one before saw.
    last: (Surroundings, u32),
    of: Labels,
}

impl Shared {
    fn new(sites: u32) -> Self {
        Self {
            known: BTreeMap::new(),
            last: (Surroundings::default(), u32::MAX),
            of: Labels::new(sites as usize),
        }
    }

    fn put(&mut self, site: u32, seen: &Surroundings) {
        if self.last.1 == u32::MAX || self.last.0 != *seen {
            let next = u32::try_from(self.known.len()).unwrap_or(u32::MAX);
            let number = match self.known.get(seen) {
                Some(number) => *number,
                None => *self.known.entry(seen.clone()).or_insert(next),
            };
            self.last.0.clone_from(seen);
            self.last.1 = number;
        }
        self.of.set(site as usize, self.last.1);
    }

    fn finish(self) -> (Vec<Surroundings>, Labels) {
        let mut list: Vec<_> = self.known.into_iter().collect();
        list.sort_unstable_by_key(|(_, number)| *number);
        (
            list.into_iter().map(|(surroundings, _)| surroundings).collect(),
            self.of,
        )
    }
}

#[cfg(test)]
mod tests;
