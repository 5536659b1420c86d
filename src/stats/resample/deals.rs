//! Dealing labels again among subjects: within each stratum every label keeps its number of subjects.

use super::random::Stream;

/// The labels that were dealt among the eligible subjects, and the strata within which they were.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Scheme {
    /// The dealt label of each eligible subject.
    pub label: Vec<u32>,
    /// The stratum of each; none where all are one stratum.
    pub strata: Option<Vec<u32>>,
}

impl Scheme {
    /// The subjects of each stratum, strata in ascending order of their numbers.
    ///
    /// # Panics
    /// Where the strata are not as many as the labels: a slip of the caller.
    pub(super) fn groups(&self) -> Vec<Vec<u32>> {
        let subjects = 0..self.label.len() as u32;
        let Some(strata) = &self.strata else {
            return if self.label.is_empty() { Vec::new() } else { vec![subjects.collect()] };
        };
        assert_eq!(strata.len(), self.label.len(), "one stratum for each subject");
        let mut groups = std::collections::BTreeMap::<u32, Vec<u32>>::new();
        for subject in subjects {
            groups.entry(strata[subject as usize]).or_default().push(subject);
        }
        groups.into_values().collect()
    }

    /// Labels of a group of subjects with their numbers, in ascending order.
    fn counts(&self, group: &[u32]) -> Vec<(u32, u32)> {
        let mut labels: Vec<u32> = group.iter().map(|&subject| self.label[subject as usize]).collect();
        labels.sort_unstable();
        labels.chunk_by(|a, b| a == b).map(|run| (run[0], run.len() as u32)).collect()
    }

    /// How many different deals there are: the product over strata of n! / (n1! n2! ...); none beyond 2^64 - 1.
    ///
    /// ```
    /// use aforesaid::stats::resample::Scheme;
    /// let scheme = Scheme { label: vec![0, 0, 0, 0, 1, 1, 1, 1], strata: None };
    /// assert_eq!(scheme.distinct(), Some(70));
    /// ```
    pub fn distinct(&self) -> Option<u64> {
        let mut product = 1_u64;
        for group in self.groups() {
            let mut placed = 0_u64;
            for (_, count) in self.counts(&group) {
                let mut choices = 1_u128;
                // Multiplying before dividing keeps every step whole: choices is C(placed + k, k).
                for k in 1..=u128::from(count) {
                    choices = choices * (u128::from(placed) + k) / k;
                    if choices > u128::from(u64::MAX) {
                        return None;
                    }
                }
                placed += u64::from(count);
                product = product.checked_mul(u64::try_from(choices).ok()?)?;
            }
        }
        Some(product)
    }

    /// All deals in a fixed order: strata as digits, the last varying fastest, each in lexicographic order of its labels.
    pub fn listed(&self) -> Listing {
        let groups = self.groups();
        let mut label = self.label.clone();
        for group in &groups {
            sort(group, &mut label);
        }
        Listing { groups, label, started: false }
    }
}

/// Puts the labels of a group in ascending order.
fn sort(group: &[u32], label: &mut [u32]) {
    let mut labels: Vec<u32> = group.iter().map(|&subject| label[subject as usize]).collect();
    labels.sort_unstable();
    for (&subject, value) in group.iter().zip(labels) {
        label[subject as usize] = value;
    }
}

/// All deals of a [`Scheme`], one after the other.
#[derive(Clone, Debug)]
pub struct Listing {
    groups: Vec<Vec<u32>>,
    label: Vec<u32>,
    started: bool,
}

impl Listing {
    /// The next deal: the label of each eligible subject.
    pub fn next_deal(&mut self) -> Option<&[u32]> {
        if !self.started {
            self.started = true;
            return Some(&self.label);
        }
        for group in self.groups.iter().rev() {
            if next_arrangement(group, &mut self.label) {
                return Some(&self.label);
            }
            sort(group, &mut self.label);
        }
        None
    }
}

/// The next arrangement of a group's labels in lexicographic order (Narayana Pandita's step); false at the last.
fn next_arrangement(group: &[u32], label: &mut [u32]) -> bool {
    let at = |place: usize| group[place] as usize;
    let Some(pivot) = (1..group.len()).rev().find(|&place| label[at(place - 1)] < label[at(place)]).map(|place| place - 1) else {
        return false;
    };
    let pivot_label = label[at(pivot)];
    let later = (pivot + 1..group.len()).rev().find(|&place| label[at(place)] > pivot_label).unwrap_or(pivot);
    label.swap(at(pivot), at(later));
    let (mut left, mut right) = (pivot + 1, group.len() - 1);
    while left < right {
        label.swap(at(left), at(right));
        left += 1;
        right -= 1;
    }
    true
}

/// A run of subjects in the order of a shuffle that get the same label.
#[derive(Clone, Debug)]
pub(super) struct Segment {
    pub label: u32,
    pub places: std::ops::Range<usize>,
}

/// One stratum: its places in the order, and who gets what.
#[derive(Clone, Debug)]
pub(super) struct Stratum {
    pub places: std::ops::Range<usize>,
    /// Those dealt to, smallest label number first.
    pub dealt: Vec<Segment>,
    /// The largest label, which gets whoever is left.
    pub left: Segment,
}

/// Random deals: an order of the subjects that is shuffled as far as needed, in place, deal after deal.
///
/// ```
/// use aforesaid::stats::resample::{Scheme, Shuffle, Stream};
/// let scheme = Scheme { label: vec![0, 0, 1, 1, 1], strata: None };
/// let mut shuffle = Shuffle::new(&scheme);
/// shuffle.deal(&mut Stream::new([0; 32], 0));
/// let mut labels = vec![0; 5];
/// shuffle.labels(&mut labels);
/// assert_eq!(labels.iter().sum::<u32>(), 3);
/// ```
#[derive(Clone, Debug)]
pub struct Shuffle {
    pub(super) order: Vec<u32>,
    pub(super) strata: Vec<Stratum>,
    start: Vec<u32>,
}

impl Shuffle {
    /// Before the first deal.
    pub fn new(scheme: &Scheme) -> Shuffle {
        let mut order = Vec::with_capacity(scheme.label.len());
        let mut strata = Vec::new();
        for group in scheme.groups() {
            let first = order.len();
            let mut counts = scheme.counts(&group);
            let largest = (0..counts.len()).rev().max_by_key(|&index| counts[index].1).unwrap_or(0);
            let last = counts.remove(largest);
            let mut place = first;
            let mut segment = |(label, count): (u32, u32)| {
                let places = place..place + count as usize;
                place = places.end;
                Segment { label, places }
            };
            let dealt = counts.into_iter().map(&mut segment).collect();
            let left = segment(last);
            order.extend(group);
            strata.push(Stratum { places: first..order.len(), dealt, left });
        }
        Shuffle { start: order.clone(), order, strata }
    }

    /// Back to the order before the first deal, so that a block of deals depends on its stream alone.
    pub fn restart(&mut self) {
        self.order.copy_from_slice(&self.start);
    }

    /// One deal, every one equally likely: Fisher and Yates' shuffle, stopped where only the largest label is left.
    pub fn deal(&mut self, stream: &mut Stream) {
        for stratum in &self.strata {
            let taken = stratum.left.places.start - stratum.places.start;
            shuffle_front(&mut self.order[stratum.places.clone()], taken, stream);
        }
    }

    /// The label of each eligible subject in the present deal.
    ///
    /// # Panics
    /// Where `label` has not one place for each: a slip of the caller.
    pub fn labels(&self, label: &mut [u32]) {
        assert_eq!(label.len(), self.order.len(), "one place for each subject");
        for segment in self.strata.iter().flat_map(|stratum| stratum.dealt.iter().chain(std::iter::once(&stratum.left))) {
            for &subject in &self.order[segment.places.clone()] {
                label[subject as usize] = segment.label;
            }
        }
    }
}

/// Brings `taken` random subjects to the front.
fn shuffle_front(order: &mut [u32], taken: usize, stream: &mut Stream) {
    let mut place = 0;
    while place < taken {
        let size = order.len() - place;
        let left = taken - place;
        // So many that the product of the bounds stays well below 2^64, which makes a rejection rare.
        place += match size {
            ..=128 if left >= 8 => step::<8>(order, place, stream),
            ..=2_048 if left >= 5 => step::<5>(order, place, stream),
            ..=16_384 if left >= 4 => step::<4>(order, place, stream),
            ..=0x1000_0000 if left >= 2 => step::<2>(order, place, stream),
            _ => step::<1>(order, place, stream),
        };
    }
}

#[inline(always)]
fn step<const K: usize>(order: &mut [u32], place: usize, stream: &mut Stream) -> usize {
    let mut bounds = [0; K];
    for (ahead, bound) in bounds.iter_mut().enumerate() {
        *bound = (order.len() - place - ahead) as u32;
    }
    for (ahead, drawn) in stream.below_each(bounds).into_iter().enumerate() {
        order.swap(place + ahead, place + ahead + drawn as usize);
    }
    K
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    fn scheme() -> impl Strategy<Value = Scheme> {
        prop::collection::vec((0..3_u32, 0..2_u32), 1..9).prop_flat_map(|subjects| {
            any::<bool>().prop_map(move |stratified| Scheme {
                label: subjects.iter().map(|subject| subject.0).collect(),
                strata: stratified.then(|| subjects.iter().map(|subject| subject.1).collect()),
            })
        })
    }

    fn kept(scheme: &Scheme, deal: &[u32]) -> bool {
        let dealt = Scheme { label: deal.to_vec(), strata: scheme.strata.clone() };
        scheme.groups().iter().all(|group| scheme.counts(group) == dealt.counts(group))
    }

    proptest! {
        #[test]
        fn a_listing_has_every_deal_once(scheme in scheme()) {
            let mut listing = scheme.listed();
            let mut seen = std::collections::BTreeSet::new();
            let mut number = 0;
            while let Some(deal) = listing.next_deal() {
                prop_assert!(kept(&scheme, deal));
                seen.insert(deal.to_vec());
                number += 1;
            }
            prop_assert_eq!(Some(number), scheme.distinct());
            prop_assert_eq!(seen.len() as u64, number);
            prop_assert!(seen.contains(&scheme.label));
        }

        #[test]
        fn a_random_deal_keeps_the_counts(scheme in scheme(), stream in any::<u64>()) {
            let mut shuffle = Shuffle::new(&scheme);
            let mut stream = Stream::new([3; 32], stream);
            let mut labels = vec![0; scheme.label.len()];
            for _ in 0..5 {
                shuffle.deal(&mut stream);
                shuffle.labels(&mut labels);
                prop_assert!(kept(&scheme, &labels));
            }
        }
    }

    /// 4 + 2 + 2 subjects have 420 deals; 84,000 random ones give each 200 on average, and Pearson's chi-square on 419 df
    /// stays below its mean by six standard deviations, 419 + 6 sqrt(838) = 593.
    #[test]
    fn random_deals_are_equally_likely() {
        let scheme = Scheme { label: vec![0, 1, 2, 0, 1, 2, 0, 0], strata: None };
        assert_eq!(scheme.distinct(), Some(420));
        let mut shuffle = Shuffle::new(&scheme);
        let mut stream = Stream::new([4; 32], 0);
        let mut labels = vec![0; 8];
        let mut counts = std::collections::BTreeMap::<Vec<u32>, f64>::new();
        for _ in 0..84_000 {
            shuffle.deal(&mut stream);
            shuffle.labels(&mut labels);
            *counts.entry(labels.clone()).or_default() += 1.0;
        }
        assert_eq!(counts.len(), 420);
        let chi_squared: f64 = counts.values().map(|count| (count - 200.0) * (count - 200.0) / 200.0).sum();
        assert!(chi_squared < 593.0, "{chi_squared}");
    }

    #[test]
    fn more_deals_than_can_be_counted_are_none() {
        let label = (0..200).map(|subject| subject % 2).collect();
        assert_eq!(Scheme { label, strata: None }.distinct(), None);
    }
}
