//! Conditions with their references bound to slots, evaluated over the verdicts so far.

use crate::execute::verdict::{Truth, Verdict, Word, holds_of_one, holds_of_several};

/// What a condition refers to.
#[derive(Debug, Clone, PartialEq, Eq)]
pub enum Target {
    /// One test or screen.
    One(usize),
    /// A step of several tests: its slots.
    Several(std::ops::Range<usize>),
}

impl Target {
    /// The slots it stands for.
    pub fn slots(&self) -> std::ops::Range<usize> {
        match self {
            Target::One(slot) => *slot..*slot + 1,
            Target::Several(slots) => slots.clone(),
        }
    }
}

/// A condition whose references are bound.
#[derive(Debug, Clone, PartialEq, Eq)]
pub enum BoundCondition {
    /// All must hold.
    All(Vec<BoundCondition>),
    /// One must hold.
    Either(Vec<BoundCondition>),
    /// Turned over within the tested verdicts only.
    Not(Box<BoundCondition>),
    /// One of the words is true of the target.
    Is {
        /// As written, for the record.
        reference: String,
        /// What it is bound to.
        target: Target,
        /// Any of these will do.
        words: Vec<Word>,
    },
}

impl BoundCondition {
    /// Whether it holds, given the verdict in each slot.
    pub fn holds(&self, verdicts: &[Verdict]) -> Truth {
        match self {
            BoundCondition::All(parts) => parts.iter().fold(Truth::True, |so_far, part| so_far.and(part.holds(verdicts))),
            BoundCondition::Either(parts) => parts.iter().fold(Truth::False, |so_far, part| so_far.or(part.holds(verdicts))),
            BoundCondition::Not(inner) => match inner.holds(verdicts) {
                Truth::True => Truth::False,
                Truth::Unknown => Truth::Unknown,
                Truth::False => inner.is_settled(verdicts),
            },
            BoundCondition::Is { target, words, .. } => words.iter().fold(Truth::False, |so_far, word| {
                so_far.or(match target {
                    Target::One(slot) => holds_of_one(*word, verdicts[*slot]),
                    Target::Several(slots) => holds_of_several(*word, &verdicts[slots.clone()]),
                })
            }),
        }
    }

    /// Whether everything that it refers to was tested: false where something was not, unknown where something was
    /// refused.
    fn is_settled(&self, verdicts: &[Verdict]) -> Truth {
        let mut settled = Truth::True;
        self.each_target(&mut |_, target| {
            let slots = &verdicts[target.slots()];
            settled = settled.and(match target {
                _ if slots.contains(&Verdict::Refused) => Truth::Unknown,
                Target::One(_) => Truth::of(slots[0].is_tested()),
                Target::Several(_) => Truth::of(slots.iter().any(|verdict| verdict.is_tested())),
            });
        });
        settled
    }

    /// Calls `see` for every reference in it, in the order written.
    pub fn each_target<'a>(&'a self, see: &mut impl FnMut(&'a str, &'a Target)) {
        match self {
            BoundCondition::All(parts) | BoundCondition::Either(parts) => parts.iter().for_each(|part| part.each_target(see)),
            BoundCondition::Not(inner) => inner.each_target(see),
            BoundCondition::Is { reference, target, .. } => see(reference, target),
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::execute::verdict::Direction;

    fn is(slot: usize, word: Word) -> BoundCondition {
        BoundCondition::Is { reference: format!("t{slot}"), target: Target::One(slot), words: vec![word] }
    }

    #[test]
    fn not_turns_over_within_the_tested_verdicts_only() {
        let not = BoundCondition::Not(Box::new(is(0, Word::Significant)));
        assert_eq!(not.holds(&[Verdict::NotSignificant]), Truth::True);
        assert_eq!(not.holds(&[Verdict::Significant(Direction::None)]), Truth::False);
        assert_eq!(not.holds(&[Verdict::NotTested]), Truth::False);
        assert_eq!(not.holds(&[Verdict::Refused]), Truth::Unknown);
    }

    #[test]
    fn a_false_part_settles_what_a_refusal_leaves_open() {
        let both = BoundCondition::All(vec![is(0, Word::Significant), is(1, Word::Significant)]);
        assert_eq!(both.holds(&[Verdict::NotSignificant, Verdict::Refused]), Truth::False);
        assert_eq!(both.holds(&[Verdict::Significant(Direction::None), Verdict::Refused]), Truth::Unknown);
        let one = BoundCondition::Either(vec![is(0, Word::Significant), is(1, Word::Refused)]);
        assert_eq!(one.holds(&[Verdict::NotTested, Verdict::Refused]), Truth::True);
    }
}
