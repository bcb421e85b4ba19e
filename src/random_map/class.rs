//! The lists of a sweep: sites of one colour, and which lane each of them is (`STREAM.md` §4).
//!
//! A class takes about a bit for each site of the lattice where many sites are in it, and a number
//! for each of its own sites where few are.

use super::labels::Labels;

/// Sites, or lanes, to a mark; that of a group, so that a group begins at a mark.
const MARK: usize = 512;
const WORDS: usize = MARK / 64;

/// The sites of one colour by increasing number; the place of a site among them is its lane.
#[derive(Debug)]
pub struct Class {
    lanes: u32,
    sites: Sites,
}

#[derive(Debug)]
enum Sites {
    /// A bit for each site of the lattice, with marks to begin at.
    Dense {
        words: Vec<u64>,
        /// How many lanes lie before each block of sites.
        before: Vec<u32>,
        /// The block of sites in which each block of lanes begins.
        begins: Vec<u32>,
    },
    Sparse(Vec<u32>),
}

impl Class {
    /// The classes of `colours`, a number for each site: 0 for no class, else the number of its class from 1 on.
    pub(super) fn of_colours(sites: u32, colours: &Labels, lanes: &[u32]) -> Vec<Self> {
        let empty = |lanes: &u32| Self {
            lanes: *lanes,
            sites: if *lanes < sites / 32 {
                Sites::Sparse(Vec::with_capacity(*lanes as usize))
            } else {
                Sites::Dense {
                    words: vec![0; (sites as usize).div_ceil(MARK) * WORDS],
                    before: Vec::new(),
                    begins: Vec::new(),
                }
            },
        };
        let mut classes: Vec<Self> = lanes.iter().map(empty).collect();
        for site in 0..sites {
            let Some(class) = (colours.get(site as usize) as usize).checked_sub(1) else {
                continue;
            };
            match &mut classes[class].sites {
                Sites::Dense { words, .. } => words[site as usize / 64] |= 1 << (site % 64),
                Sites::Sparse(list) => list.push(site),
            }
        }
        for class in &mut classes {
            class.sites.mark();
        }
        classes
    }

    /// The number of lanes.
    pub fn lanes(&self) -> u32 {
        self.lanes
    }

    /// The sites by increasing number, which is in the order of their lanes.
    pub fn sites(&self) -> impl Iterator<Item = u32> + '_ {
        self.sites_from(0)
    }

    /// The sites from `lane` on; fast where that is a multiple of a group.
    pub fn sites_from(&self, lane: u32) -> impl Iterator<Item = u32> + '_ {
        let (dense, sparse) = match &self.sites {
            Sites::Dense { words, before, begins } if lane < self.lanes => {
                (Some(Bits::from(words, before, begins, lane)), None)
            }
            Sites::Dense { .. } => (None, None),
            Sites::Sparse(list) => (None, list.get(lane as usize..)),
        };
        dense.into_iter().flatten().chain(sparse.into_iter().flatten().copied())
    }

    /// The lane that is `site`, if it is in this class.
    pub fn lane(&self, site: u32) -> Option<u32> {
        match &self.sites {
            Sites::Dense { words, before, .. } => {
                let at = site as usize / 64;
                let own = 1 << (site % 64);
                if words[at] & own == 0 {
                    return None;
                }
                let block = at / WORDS;
                let lower = words[block * WORDS..at].iter().map(|word| word.count_ones());
                Some(before[block] + lower.sum::<u32>() + (words[at] & (own - 1)).count_ones())
            }
            Sites::Sparse(list) => list.binary_search(&site).ok().map(|lane| lane as u32),
        }
    }
}

impl Sites {
    /// Counts the bits, once all are set.
    fn mark(&mut self) {
        let Self::Dense { words, before, begins } = self else {
            return;
        };
        let mut lanes = 0;
        for (block, words) in (0..).zip(words.chunks(WORDS)) {
            before.push(lanes);
            lanes += words.iter().map(|word| word.count_ones()).sum::<u32>();
            while begins.len() * MARK < lanes as usize {
                begins.push(block);
            }
        }
    }
}

/// The places of the bits that are set.
struct Bits<'a> {
    words: &'a [u64],
    at: usize,
    /// What is left of the word there.
    word: u64,
}

impl<'a> Bits<'a> {
    fn from(words: &'a [u64], before: &[u32], begins: &[u32], lane: u32) -> Self {
        let mut block = begins[lane as usize / MARK] as usize;
        while before.get(block + 1).is_some_and(|before| *before <= lane) {
            block += 1;
        }
        let (mut at, mut over) = (block * WORDS, lane - before[block]);
        while over >= words[at].count_ones() {
            over -= words[at].count_ones();
            at += 1;
        }
        let mut word = words[at];
        for _ in 0..over {
            word &= word - 1;
        }
        Self { words, at, word }
    }
}

impl Iterator for Bits<'_> {
    type Item = u32;

    fn next(&mut self) -> Option<u32> {
        while self.word == 0 {
            self.at += 1;
            self.word = *self.words.get(self.at)?;
        }
        let site = self.at as u32 * 64 + self.word.trailing_zeros();
        self.word &= self.word - 1;
        Some(site)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Against a sorted list, from many sites a class to few, whatever the number of sites.
    #[test]
    fn a_class_is_its_sorted_list() {
        for (sites, every) in [
            (1, 1),
            (64, 1),
            (511, 2),
            (513, 3),
            (5000, 2),
            (40_000, 7),
            (40_000, 31),
            (40_000, 33),
            (40_000, 9000),
        ] {
            // the sites of class 2 stand in runs of uneven length, all others are in class 1 or in none
            let belongs = |site: u32| site / 5 % every == site % 3 % every;
            let mut colours = Labels::new(sites as usize);
            for site in 0..sites {
                colours.set(site as usize, if belongs(site) { 2 } else { site % 2 });
            }
            let list: Vec<u32> = (0..sites).filter(|site| belongs(*site)).collect();
            let others = (0..sites).filter(|site| !belongs(*site) && site % 2 == 1).count();
            let lanes = [others, list.len()].map(|lanes| u32::try_from(lanes).unwrap());
            let classes = Class::of_colours(sites, &colours, &lanes);
            let class = &classes[1];
            assert!(class.sites().eq(list.iter().copied()), "1 of {every} of {sites}");
            assert_eq!(class.lanes() as usize, list.len());
            let beyond = [class.lanes(), class.lanes() + 1, class.lanes() + 512];
            for lane in (0..class.lanes())
                .step_by(37)
                .chain((0..class.lanes()).step_by(512))
                .chain(beyond)
            {
                let rest = list.get(lane as usize..).unwrap_or_default();
                assert!(
                    class.sites_from(lane).eq(rest.iter().copied()),
                    "lane {lane} of {sites}"
                );
            }
            for site in 0..sites {
                assert_eq!(class.lane(site), list.binary_search(&site).ok().map(|lane| lane as u32));
            }
            assert_eq!(classes[0].sites().count(), others);
        }
    }
}
