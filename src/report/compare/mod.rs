//! Several schemes side by side: tables, ranking, pictures, document.

mod figures;
mod page;
mod tables;

use serde_json::{Value, json};

pub use figures::{backoff_figure, spectrum_figures};
pub use page::page;
pub use tables::text;

use crate::study::{CheckResult, Compared, Inverted, Rank, backoff, follows};
use crate::verdict::MaskMargin;

/// The scheme with its number among those compared.
fn scheme_name(compared: &Compared) -> String {
    format!(
        "{} ({})",
        compared.result.scheme().name(),
        compared.scheme + 1
    )
}

/// The same, predistorted or not.
fn full_name(compared: &Compared) -> String {
    let name = scheme_name(compared);
    match compared.inverted {
        Inverted::Without | Inverted::Straight => name,
        Inverted::With => format!("{name} predistorted"),
    }
}

/// The worst neighbour, dB.
fn worst_acpr_db(result: &CheckResult) -> Option<f64> {
    let rows = result.metrics.acpr.iter();
    rows.flat_map(|pair| [pair.lower_db, pair.upper_db])
        .reduce(f64::max)
}

/// The mask's tightest point.
fn tightest(result: &CheckResult) -> Option<&MaskMargin> {
    let margins = result.metrics.mask.iter();
    margins.min_by(|a, b| a.margin_db.total_cmp(&b.margin_db))
}

/// The document of `quietedge compare`.
pub fn document(compared: &[Compared], ranks: &[Rank]) -> Value {
    let schemes: Vec<Value> = compared
        .iter()
        .map(|one| {
            let result = &one.result;
            let mut value = super::documents::check_document(result);
            value["number"] = json!(one.scheme + 1);
            value["predistorted"] = json!(one.inverted);
            value["follows"] = json!(follows(result));
            value["worst_acpr_db"] = json!(worst_acpr_db(result));
            value["worst_mask"] = json!(tightest(result));
            value["backoff"] = json!(backoff(result));
            value
        })
        .collect();
    json!({ "schemes": schemes, "ranking": ranks })
}
