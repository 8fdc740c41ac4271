//! The order of preference among schemes that were compared.

use super::compare::{Compared, Inverted};
use super::result::CheckResult;
use super::warning::Warning;
use crate::verdict::Outcome;

/// Why a scheme stands where it does.
#[derive(Debug, Clone, PartialEq, serde::Serialize)]
pub struct Rank {
    /// Which result, from 0.
    pub index: usize,
    /// In words.
    pub reason: String,
}

/// The order of preference: within limits before undecided before outside. Among those within, schemes that can
/// follow the signal before those that cannot, then the more efficient; among others the larger margin.
pub fn ranked(compared: &[Compared]) -> Vec<Rank> {
    let class = |result: &CheckResult| match result.judgement.verdict.outcome {
        Outcome::Within => 0,
        Outcome::Undecided => 1,
        Outcome::Outside => 2,
    };
    let margin = |result: &CheckResult| {
        let tightest = result.judgement.verdict.tightest();
        tightest
            .and_then(|check| check.margin_db)
            .unwrap_or(f64::NEG_INFINITY)
    };
    let mut order: Vec<usize> = (0..compared.len()).collect();
    order.sort_by(|&a, &b| {
        let (a, b) = (&compared[a].result, &compared[b].result);
        let by_margin = margin(b).total_cmp(&margin(a));
        let efficiency = |result: &CheckResult| result.metrics.efficiency.unwrap_or(-1.0);
        class(a).cmp(&class(b)).then(if class(a) == 0 {
            let by_efficiency = efficiency(b).total_cmp(&efficiency(a));
            (!follows(a))
                .cmp(&!follows(b))
                .then(by_efficiency)
                .then(by_margin)
        } else {
            by_margin.then((!follows(a)).cmp(&!follows(b)))
        })
    });
    plain_first(compared, &mut order);
    order
        .into_iter()
        .map(|index| Rank {
            index,
            reason: reason(&compared[index].result),
        })
        .collect()
}

/// Efficiency, as a part, and margin, dB, by which predistortion must better a scheme to be worth having.
const WORTH: (f64, f64) = (1e-3, 0.1);

/// Puts a scheme before its own predistorted self where that stands right before it and gains nothing.
fn plain_first(compared: &[Compared], order: &mut [usize]) {
    let gains = |with: &CheckResult, without: &CheckResult| {
        let efficiency = |result: &CheckResult| result.metrics.efficiency.unwrap_or(0.0);
        let margin = |result: &CheckResult| {
            let tightest = result.judgement.verdict.tightest();
            tightest.and_then(|check| check.margin_db).unwrap_or(0.0)
        };
        with.judgement.verdict.outcome != without.judgement.verdict.outcome
            || efficiency(with) - efficiency(without) > WORTH.0
            || margin(with) - margin(without) > WORTH.1
    };
    for at in 1..order.len() {
        let (first, second) = (&compared[order[at - 1]], &compared[order[at]]);
        if first.scheme == second.scheme
            && first.inverted == Inverted::With
            && !gains(&first.result, &second.result)
        {
            order.swap(at - 1, at);
        }
    }
}

/// Whether the scheme follows the signal everywhere, as far as it says.
pub fn follows(result: &CheckResult) -> bool {
    let cannot = |warning: &Warning| matches!(warning, Warning::GridTooCoarse { .. });
    !result.warnings.iter().any(cannot)
}

fn reason(result: &CheckResult) -> String {
    let verdict = &result.judgement.verdict;
    let tightest = verdict.tightest();
    let by = tightest.map_or(String::new(), |check| {
        format!(
            ", {} by {:+.2} dB",
            check.name,
            check.margin_db.unwrap_or(f64::NAN)
        )
    });
    let efficiency = result
        .metrics
        .efficiency
        .map_or("efficiency not known".to_owned(), |efficiency| {
            format!("{:.1} % efficient", 100.0 * efficiency)
        });
    let coarse = match follows(result) {
        true => "",
        false => "; cannot follow the deepest notch",
    };
    match verdict.outcome {
        Outcome::Within => format!("within all limits, {efficiency}{by}{coarse}"),
        Outcome::Undecided => format!("undecided, {efficiency}{by}{coarse}"),
        Outcome::Outside => format!("outside{by}, {efficiency}{coarse}"),
    }
}
