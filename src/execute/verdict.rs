//! Verdicts, and what a step of several tests amounts to.

/// The direction of a comparison.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Direction {
    /// Several degrees of freedom: no direction.
    None,
    /// The estimate is above zero.
    Above,
    /// The estimate is below zero.
    Below,
}

/// What became of one test, or of one screen.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Verdict {
    /// Not yet judged: its step, or a later member of its family, has still to be computed.
    Pending,
    /// Its step was not run.
    NotTested,
    /// It cannot be computed for these data.
    Refused,
    /// Tested, and not significant.
    NotSignificant,
    /// Tested and significant.
    Significant(Direction),
    /// A claim of equivalence or non-inferiority was tested and shown.
    Shown,
    /// Such a claim was tested, and not shown.
    NotShown,
    /// A screen saw a departure.
    DepartureShown,
    /// A screen saw none.
    NoDepartureShown,
}

impl Verdict {
    /// Whether a test was carried out and judged, or a screen looked.
    pub fn is_tested(self) -> bool {
        !matches!(self, Verdict::Pending | Verdict::NotTested | Verdict::Refused)
    }

    /// Whether it is significant in either direction, or a claim that was shown.
    pub fn is_significant(self) -> bool {
        matches!(self, Verdict::Significant(_) | Verdict::Shown)
    }
}

/// A word of a condition, with the level that `favours` names already turned into a direction.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Word {
    /// `significant`, in either direction; of a claim, `shown`.
    Significant,
    /// `not significant`; of a claim, `not shown`.
    NotSignificant,
    /// `not tested`.
    NotTested,
    /// `refused`.
    Refused,
    /// `above zero`, or `favours` the level that this favours.
    Above,
    /// `below zero`, or `favours` the level that this favours.
    Below,
    /// `departure shown`.
    DepartureShown,
    /// `no departure shown`.
    NoDepartureShown,
    /// `any significant`, or `any shown`.
    AnySignificant,
    /// `all significant`, or `all shown`.
    AllSignificant,
    /// `none significant`, or `none shown`.
    NoneSignificant,
}

/// Three-valued truth: a refusal leaves a condition unknown.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Truth {
    /// It holds.
    True,
    /// It does not hold.
    False,
    /// A refusal leaves it open.
    Unknown,
}

impl Truth {
    /// Of a plain yes or no.
    pub fn of(holds: bool) -> Truth {
        if holds { Truth::True } else { Truth::False }
    }

    /// Both.
    pub fn and(self, other: Truth) -> Truth {
        match (self, other) {
            (Truth::False, _) | (_, Truth::False) => Truth::False,
            (Truth::True, Truth::True) => Truth::True,
            _ => Truth::Unknown,
        }
    }

    /// At least one.
    pub fn or(self, other: Truth) -> Truth {
        match (self, other) {
            (Truth::True, _) | (_, Truth::True) => Truth::True,
            (Truth::False, Truth::False) => Truth::False,
            _ => Truth::Unknown,
        }
    }
}

/// Whether `word` is true of one test or screen.
pub fn holds_of_one(word: Word, verdict: Verdict) -> Truth {
    let asked_for = match (word, verdict) {
        (Word::Refused, _) => return Truth::of(verdict == Verdict::Refused),
        (Word::NotTested, _) => return Truth::of(matches!(verdict, Verdict::NotTested | Verdict::Pending)),
        (_, Verdict::Refused) => return Truth::Unknown,
        (Word::Significant | Word::AnySignificant | Word::AllSignificant, _) => verdict.is_significant(),
        (Word::NotSignificant | Word::NoneSignificant, _) => matches!(verdict, Verdict::NotSignificant | Verdict::NotShown),
        (Word::Above, _) => verdict == Verdict::Significant(Direction::Above),
        (Word::Below, _) => verdict == Verdict::Significant(Direction::Below),
        (Word::DepartureShown, _) => verdict == Verdict::DepartureShown,
        (Word::NoDepartureShown, _) => verdict == Verdict::NoDepartureShown,
    };
    Truth::of(asked_for)
}

/// Whether `word` is true of a step of several tests.
///
/// `any significant`: at least one is; `all significant`: every member was tested and is; `none significant`: none is,
/// none was refused, at least one was tested. Where a refusal leaves it open, it is unknown.
pub fn holds_of_several(word: Word, verdicts: &[Verdict]) -> Truth {
    let any = verdicts.iter().any(|verdict| verdict.is_significant());
    let refused = verdicts.contains(&Verdict::Refused);
    let tested = verdicts.iter().any(|verdict| verdict.is_tested());
    match word {
        Word::AnySignificant if any => Truth::True,
        Word::NoneSignificant if any => Truth::False,
        Word::AnySignificant | Word::NoneSignificant if refused => Truth::Unknown,
        Word::AnySignificant => Truth::False,
        Word::NoneSignificant => Truth::of(tested),
        Word::AllSignificant if verdicts.iter().any(|verdict| !verdict.is_significant() && *verdict != Verdict::Refused) => Truth::False,
        Word::AllSignificant if refused => Truth::Unknown,
        Word::AllSignificant => Truth::of(any),
        Word::NotTested => Truth::of(!tested && !refused),
        other => verdicts.iter().fold(Truth::True, |so_far, verdict| so_far.and(holds_of_one(other, *verdict))),
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use Verdict::{NotSignificant as No, NotTested, Refused};
    const YES: Verdict = Verdict::Significant(Direction::Above);

    #[test]
    fn a_refusal_leaves_open_only_what_it_could_change() {
        assert_eq!(holds_of_several(Word::AnySignificant, &[YES, Refused]), Truth::True);
        assert_eq!(holds_of_several(Word::AnySignificant, &[No, Refused]), Truth::Unknown);
        assert_eq!(holds_of_several(Word::NoneSignificant, &[No, Refused]), Truth::Unknown);
        assert_eq!(holds_of_several(Word::NoneSignificant, &[YES, Refused]), Truth::False);
        assert_eq!(holds_of_several(Word::AllSignificant, &[No, Refused]), Truth::False);
        assert_eq!(holds_of_several(Word::AllSignificant, &[YES, Refused]), Truth::Unknown);
    }

    #[test]
    fn what_was_not_tested_is_never_none_significant() {
        assert_eq!(holds_of_several(Word::NoneSignificant, &[NotTested, NotTested]), Truth::False);
        assert_eq!(holds_of_several(Word::NotTested, &[NotTested, NotTested]), Truth::True);
        assert_eq!(holds_of_several(Word::AllSignificant, &[YES, NotTested]), Truth::False);
        assert_eq!(holds_of_several(Word::NoneSignificant, &[No, NotTested]), Truth::True);
        assert_eq!(holds_of_one(Word::NotSignificant, NotTested), Truth::False);
    }

    #[test]
    fn significant_covers_both_directions() {
        for direction in [Direction::None, Direction::Above, Direction::Below] {
            assert_eq!(holds_of_one(Word::Significant, Verdict::Significant(direction)), Truth::True);
        }
        assert_eq!(holds_of_one(Word::Below, YES), Truth::False);
        assert_eq!(holds_of_one(Word::Below, Refused), Truth::Unknown);
    }
}
