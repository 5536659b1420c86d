//! What can be referred to, and by which verdicts.

use super::reader::Reader;
use crate::plan::resolved::{Test, TestKind};
use crate::text::source::Span;
use crate::text::suggest::nearest;
use std::cell::RefCell;
use std::collections::HashMap;

/// What a reference stands for.
#[derive(Debug, Clone, PartialEq)]
pub(super) enum Kind {
    Screen,
    /// One test, perhaps with a direction, perhaps with levels that its directions favour.
    One {
        comparison: bool,
        favours: Option<[String; 2]>,
    },
    /// One test of a claim: equivalence or non-inferiority.
    Claim,
    /// A step of several tests, which may be claims.
    Several {
        claims: bool,
    },
    /// Something of an estimate step, which has no verdict.
    Estimate,
}

/// Something that the plan defines.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct Known {
    pub reference: String,
    pub kind: Kind,
    /// Number of its step.
    pub step: usize,
}

impl Known {
    /// The verdicts that conditions may ask of it.
    pub fn verdicts(&self) -> Vec<String> {
        let words: &[&str] = match &self.kind {
            Kind::Screen => &["departure shown", "no departure shown", "refused"],
            Kind::One { comparison: false, .. } => &["significant", "not significant", "not tested", "refused"],
            Kind::One { .. } => &["significant", "above zero", "below zero", "not significant", "not tested", "refused"],
            Kind::Claim => &["shown", "not shown", "not tested", "refused"],
            Kind::Several { claims: false } => &["any significant", "all significant", "none significant", "not tested"],
            Kind::Several { claims: true } => &["any shown", "all shown", "none shown", "not tested"],
            Kind::Estimate => &[],
        };
        let mut words: Vec<String> = words.iter().map(|word| (*word).to_owned()).collect();
        if let Kind::One { favours: Some(levels), .. } = &self.kind {
            words.extend(levels.iter().map(|level| format!("favours {level}")));
        }
        words
    }

    pub fn in_words(&self) -> String {
        let what = match self.kind {
            Kind::Screen => "the screen",
            Kind::One { .. } => "the test",
            Kind::Claim => "the test of a claim",
            Kind::Several { .. } => "the step of several tests",
            Kind::Estimate => "the estimate",
        };
        format!("{what} `{}`", self.reference)
    }
}

/// A reference that was used, for checks that need the families.
#[derive(Debug, Clone)]
pub(super) struct Use {
    pub reference: String,
    /// Number of the step that reads it; `None` for a conclusion.
    pub by: Option<usize>,
    pub span: Span,
}

/// What has been defined so far, and what is defined further down.
pub(super) struct References<'n> {
    known: Vec<Known>,
    by_name: HashMap<String, usize>,
    /// Identifiers of all steps with their places, in plan order.
    pub steps: &'n [(String, Span)],
    /// The step that is being read.
    pub current: Option<usize>,
    pub uses: RefCell<Vec<Use>>,
}

impl<'n> References<'n> {
    pub fn new(steps: &'n [(String, Span)]) -> Self {
        References { known: Vec::new(), by_name: HashMap::new(), steps, current: None, uses: RefCell::new(Vec::new()) }
    }

    pub fn define(&mut self, reader: &Reader<'_>, reference: String, kind: Kind, step: usize) {
        if let Some(earlier) = self.by_name.get(&reference).map(|place| &self.known[*place]) {
            let places = [(self.steps[step].1, "this step"), (self.steps[earlier.step].1, "and this one")];
            reader.conflict(
                "ambiguous-reference",
                places,
                format!("two results would both be referred to as `{reference}`"),
                "rename a step, or a level or contrast name, so that each reference means one thing",
            );
            return;
        }
        self.by_name.insert(reference.clone(), self.known.len());
        self.known.push(Known { reference, kind, step });
    }

    pub fn define_tests(&mut self, reader: &Reader<'_>, id: &str, test: &Test, step: usize) {
        let claims = matches!(test.kind, TestKind::Equivalence | TestKind::NonInferiority);
        for hypothesis in &test.hypotheses {
            let favours = hypothesis.favours.as_ref().map(|favours| [favours.above.clone(), favours.below.clone()]);
            // The largest contrast is found in the data, so that its direction says nothing that could be foreseen.
            let comparison = hypothesis.comparison && test.kind != TestKind::LargestContrast;
            let kind = if claims { Kind::Claim } else { Kind::One { comparison, favours } };
            self.define(reader, hypothesis.reference.clone(), kind, step);
        }
        if test.hypotheses.len() > 1 {
            self.define(reader, id.to_owned(), Kind::Several { claims }, step);
        }
    }

    pub fn get(&self, reference: &str) -> Option<&Known> {
        self.by_name.get(reference).map(|place| &self.known[*place])
    }

    pub fn all(&self) -> &[Known] {
        &self.known
    }

    /// Something that has a verdict; says what is wrong where there is none.
    pub fn look_up(&self, reader: &Reader<'_>, reference: &str, span: Span) -> Option<&Known> {
        match self.get(reference) {
            Some(Known { kind: Kind::Estimate, .. }) => {
                reader.error(
                    "estimate-has-no-verdict",
                    span,
                    format!("`{reference}` is an estimate; it has no verdict"),
                    "an estimate",
                    "a condition reads screens and tests; test a hypothesis about the size if something is to depend on it",
                );
                None
            }
            Some(known) => {
                self.uses.borrow_mut().push(Use { reference: reference.to_owned(), by: self.current, span });
                Some(known)
            }
            None => {
                self.unknown(reader, reference, span);
                None
            }
        }
    }

    /// Says that nothing so far is called `reference`.
    pub fn unknown(&self, reader: &Reader<'_>, reference: &str, span: Span) {
        let names_step = |id: &str| reference == id || reference.strip_prefix(id).is_some_and(|rest| rest.starts_with(" / "));
        let defined_steps: Vec<usize> = (0..self.steps.len()).filter(|step| names_step(&self.steps[*step].0)).collect();
        let later = self.current.and_then(|current| defined_steps.iter().copied().find(|step| *step >= current));
        if let Some(later) = later {
            let (id, place) = &self.steps[later];
            if self.current == Some(later) {
                reader.error(
                    "circular-when",
                    span,
                    format!("the step `{id}` waits for its own verdict"),
                    "refers to itself",
                    "refer to a step above it",
                );
            } else {
                reader.conflict(
                    "forward-reference",
                    [(span, "read here"), (*place, "decided only here")],
                    format!("`{reference}` is decided after it is read"),
                    "steps run in the order written: move the step that decides above the one that reads it",
                );
            }
            return;
        }
        if let Some(step) = defined_steps.first().filter(|step| !self.known.iter().any(|known| known.step == **step)) {
            // The step itself is in error; that has been said.
            let _ = step;
            return;
        }
        let near = nearest(reference, self.known.iter().map(|known| known.reference.as_str()));
        let hint = match (near, defined_steps.first()) {
            (Some(near), _) => format!("did you mean `{near}`?"),
            (None, Some(step)) => {
                let of_step: Vec<&str> =
                    self.known.iter().filter(|known| known.step == *step).map(|known| known.reference.as_str()).take(12).collect();
                format!("the step has: {}", of_step.join(", "))
            }
            (None, None) => "`aforesaid check PLAN --tests` lists every reference of a plan".to_owned(),
        };
        reader.error("unknown-reference", span, format!("nothing in the plan is called `{reference}`"), "unknown", hint);
    }
}
