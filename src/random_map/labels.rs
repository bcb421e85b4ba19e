//! A small number for each of many places, in as few bits as the largest of them needs.
//!
//! What a random map knows of each site (its colour, its profile, whether it is held) is one of a
//! few things. Nothing here knows which.

/// Numbers by place; all are 0 at first, which takes no memory.
#[derive(Debug)]
pub(super) struct Labels {
    count: usize,
    /// Bits of a number: 0, or a power of two up to 32, so that none lies in two words.
    width: u32,
    words: Vec<u64>,
}

impl Labels {
    pub(super) fn new(count: usize) -> Self {
        Self {
            count,
            width: 0,
            words: Vec::new(),
        }
    }

    pub(super) fn get(&self, place: usize) -> u32 {
        if self.width == 0 {
            return 0;
        }
        let bit = place * self.width as usize;
        (self.words[bit / 64] >> (bit % 64) & self.mask()) as u32
    }

    pub(super) fn set(&mut self, place: usize, number: u32) {
        if u64::from(number) > self.mask() {
            self.widen((32 - number.leading_zeros()).next_power_of_two());
        }
        if self.width > 0 {
            let bit = place * self.width as usize;
            let mask = self.mask() << (bit % 64);
            let word = &mut self.words[bit / 64];
            *word = *word & !mask | u64::from(number) << (bit % 64);
        }
    }

    fn mask(&self) -> u64 {
        (1 << self.width) - 1
    }

    fn widen(&mut self, width: u32) {
        let mut wider = Self {
            count: self.count,
            width,
            words: vec![0; (self.count * width as usize).div_ceil(64)],
        };
        if self.width > 0 {
            for place in 0..self.count {
                wider.set(place, self.get(place));
            }
        }
        *self = wider;
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn labels_keep_what_was_set_through_every_width() {
        let mut labels = Labels::new(1000);
        let mut known = vec![0; 1000];
        assert_eq!(labels.get(999), 0);
        for (step, largest) in [0, 1, 3, 9, 255, 256, 70_000, u32::MAX].into_iter().enumerate() {
            for place in (step..1000).step_by(7) {
                known[place] = largest - largest.min((place % 3) as u32);
                labels.set(place, known[place]);
            }
            assert!(
                (0..1000).all(|place| labels.get(place) == known[place]),
                "up to {largest}"
            );
        }
    }
}
