//! Screens: what is looked at before or beside the tests.

use super::conditions::choice;
use super::design::effect;
use super::reader::{Fields, Reader};
use super::references::References;
use super::steps::{Context, misplaced, probability};
use crate::plan::resolved::{Choice, Design, OutlyingMethod, Screen, ScreenKind, VarianceMethod};
use crate::plan::syntax::tree::Node;

pub(super) fn screen(
    reader: &Reader<'_>,
    fields: &Fields<'_>,
    id: &str,
    context: &Context<'_>,
    references: &References<'_>,
) -> Option<Screen> {
    let node = fields.get("screen")?;
    let words = [
        ("sphericity", LooksAt::Sphericity),
        ("equal covariance matrices", LooksAt::Covariances),
        ("equal variances", LooksAt::Variances),
        ("normal residuals", LooksAt::Normality),
        ("outlying values", LooksAt::Outliers),
        ("missingness", LooksAt::Missingness),
    ];
    let what = reader.word(node, "`screen`", &words, &[]);
    let why = match what {
        Some(LooksAt::Outliers) => {
            "say where a value counts as outlying: the size of a studentized residual, such as 3.5, or the probability of a Mahalanobis distance, such as 0.001; there is no default"
        }
        Some(LooksAt::Missingness) => {
            "say which share of missing values counts as a departure, such as `threshold: 0.1`; there is no default"
        }
        _ => "say at which p it shows a departure, for instance `threshold: 0.05`; there is no default",
    };
    let method = fields.get("method");
    let studentized = method.is_some_and(|node| node.text() == Some("studentized residuals"));
    let threshold = reader.required(fields, "threshold", "the screen", why).and_then(|node| {
        choice(reader, node, references, "`threshold`", &mut |node| {
            if studentized { residual(reader, node) } else { probability(reader, node, "`threshold`") }
        })
    });
    let design = context.design;
    let of_occasion = |occasion: usize| design.occasion_levels(occasion).join("; ");
    let each_occasion = || -> Vec<String> {
        if design.occasions() == 1 {
            vec![id.to_owned()]
        } else {
            (0..design.occasions()).map(|occasion| format!("{id} / {}", of_occasion(occasion))).collect()
        }
    };
    let (kind, names): (ScreenKind, Vec<String>) = match what? {
        LooksAt::Sphericity => {
            misplaced(reader, fields, "method", "sphericity is looked at by Mauchly's test");
            (ScreenKind::Sphericity { of: sphericity_of(reader, fields, context)? }, vec![id.to_owned()])
        }
        LooksAt::Covariances => {
            misplaced(reader, fields, "method", "covariance matrices are compared by Box's M");
            misplaced(reader, fields, "of", "covariance matrices are compared over all occasions");
            needs_arms(reader, node, design, "compares arms")?;
            (ScreenKind::EqualCovarianceMatrices, vec![id.to_owned()])
        }
        LooksAt::Variances => {
            misplaced(reader, fields, "of", "variances are compared at every occasion");
            needs_arms(reader, node, design, "compares arms")?;
            let method = reader.required(
                fields,
                "method",
                "the screen",
                "there are two: `levene` (deviations from means) and `brown-forsythe` (from medians)",
            )?;
            let words = [("levene", VarianceMethod::Levene), ("brown-forsythe", VarianceMethod::BrownForsythe)];
            let method =
                choice(reader, method, references, "`method`", &mut |node| reader.word(node, "`method` of equal variances", &words, &[]))?;
            (ScreenKind::EqualVariances { method }, each_occasion())
        }
        LooksAt::Normality => {
            misplaced(reader, fields, "method", "normality is looked at by Shapiro and Wilk's W");
            misplaced(reader, fields, "of", "residuals are looked at on every occasion and on adjacent differences");
            let mut names = each_occasion();
            names.extend((1..design.occasions()).map(|later| format!("{id} / {} vs {}", of_occasion(later - 1), of_occasion(later))));
            (ScreenKind::NormalResiduals, names)
        }
        LooksAt::Outliers => {
            misplaced(reader, fields, "of", "values are looked at on every occasion");
            let method = reader.required(
                fields,
                "method",
                "the screen",
                "there are two: `studentized residuals` (occasion by occasion) and `mahalanobis distances` (over all occasions)",
            )?;
            let words = [
                ("studentized residuals", OutlyingMethod::StudentizedResiduals),
                ("mahalanobis distances", OutlyingMethod::MahalanobisDistances),
            ];
            // The unit of the threshold hangs on it, so that it cannot follow a verdict.
            let method = reader.word(method, "`method` of outlying values", &words, &[])?;
            let names = if method == OutlyingMethod::StudentizedResiduals { each_occasion() } else { vec![id.to_owned()] };
            (ScreenKind::OutlyingValues { method: Choice::Fixed(method) }, names)
        }
        LooksAt::Missingness => {
            misplaced(reader, fields, "method", "missing values are counted");
            misplaced(reader, fields, "of", "missing values are counted at every occasion");
            let names = (0..design.cells())
                .flat_map(|cell| (0..design.occasions()).map(move |occasion| (cell, occasion)))
                .map(|(cell, occasion)| {
                    let (arm, visit) = (design.cell_levels(cell).join("; "), of_occasion(occasion));
                    match (arm.is_empty(), visit.is_empty()) {
                        (false, false) => format!("{id} / {arm} at {visit}"),
                        _ => format!("{id} / {arm}{visit}"),
                    }
                })
                .collect();
            (ScreenKind::Missingness, names)
        }
    };
    Some(Screen { kind, threshold: threshold?, references: names })
}

#[derive(Clone, Copy)]
enum LooksAt {
    Sphericity,
    Covariances,
    Variances,
    Normality,
    Outliers,
    Missingness,
}

/// The size of a studentized residual.
fn residual(reader: &Reader<'_>, node: &Node) -> Option<f64> {
    let value = reader.number(node, "`threshold`")?;
    if value > 1.0 && value <= 100.0 {
        return Some(value);
    }
    reader.error(
        "wrong-range",
        node.span,
        "the threshold of studentized residuals is the size of one, above 1",
        "here",
        "3 to 4 are common; probabilities belong to `mahalanobis distances`",
    );
    None
}

fn needs_arms(reader: &Reader<'_>, node: &Node, design: &Design, what: &str) -> Option<()> {
    if design.between.is_empty() {
        reader.error(
            "nothing-to-compare",
            node.span,
            format!("this screen {what}, and the design has none"),
            "no between factor",
            "remove the step, or name the arms under `design: between`",
        );
        return None;
    }
    Some(())
}

fn sphericity_of(reader: &Reader<'_>, fields: &Fields<'_>, context: &Context<'_>) -> Option<Vec<String>> {
    let within = &context.design.within;
    let names: Vec<&str> = within.iter().map(|factor| factor.name.as_str()).collect();
    let chosen = match fields.get("of") {
        Some(node) => effect(reader, reader.text(node, "`of`")?, node.span, &names)?,
        None if within.len() == 1 => vec![0],
        None => {
            reader.required(
                fields,
                "of",
                "the screen",
                &format!(
                    "say of which within effect: {}",
                    if names.is_empty() { "the design has no within factor".to_owned() } else { names.join(", ") }
                ),
            );
            return None;
        }
    };
    let contrasts: usize = chosen.iter().map(|place| within[*place].levels.len() - 1).product();
    if contrasts < 2 {
        let place = fields.entry("of").map_or(reader.first_line(fields.span), |entry| entry.node.span);
        reader.error(
            "nothing-to-compare",
            place,
            "sphericity cannot be departed from with two occasions",
            "only one contrast",
            "remove the screen: with a single contrast there is nothing that could differ",
        );
        return None;
    }
    Some(chosen.into_iter().map(|place| within[place].name.clone()).collect())
}
