//! The report's page.

use super::figures::{backoff_figure, spectrum_figures};
use super::tables::{reasons, tables, warnings};
use super::{full_name, scheme_name};
use crate::report::check::{Request, headline};
use crate::report::page::{CaptionedFigure, Conditions, FactGroup, Page};
use crate::report::scheme::scheme_rows;
use crate::report::text::quantity;
use crate::study::{Compared, Inverted, Rank};

/// What holds for the comparison as a whole.
const MODEL_LIMITS: [&str; 4] = [
    "All schemes are sampled at the rate of the most demanding one, and open-ended mask segments are judged out to 0.45 \
     of that rate for every one of them, so that margins are of the same readings.",
    "Predistortion is static and from the scheme's own map: the exact inverse in front of supply (or the study's own \
     table, words and clock included), the inverse of the map as the law of widths for width and levels. What is not in the map (delays, bandwidths, rails that settle, \
     mismatch of branches) it does not undo.",
    "By map: a stage is taken to settle at once to the orbit of the present control.",
    "Schemes have different full outputs: an outphasing pair delivers twice the power of one stage. Efficiencies are \
     compared at each scheme's own output.",
];

/// The page of `quietedge compare`.
pub fn page(compared: &[Compared], ranks: &[Rank], request: &Request) -> Page {
    let best = ranks.first().map(|rank| &compared[rank.index]);
    let mut figures: Vec<CaptionedFigure> = spectrum_figures(compared);
    figures.push(backoff_figure(compared));
    let mut facts = vec![FactGroup {
        title: "Ranking".to_owned(),
        rows: reasons(compared, ranks),
    }];
    let plain = compared.iter().filter(|one| one.inverted != Inverted::With);
    facts.extend(plain.map(|one| FactGroup {
        title: scheme_name(one),
        rows: scheme_rows(one.result.scheme()),
    }));
    facts.push(FactGroup {
        title: "Sampling".to_owned(),
        rows: compared
            .iter()
            .map(|one| {
                let rate = &one.result.rate;
                let value = format!(
                    "{}x, {}; from {}x margins moved by {:.3} dB at most",
                    rate.factor,
                    quantity(rate.rate_hz, "Hz", 5),
                    rate.convergence.against_factor,
                    rate.convergence.moved_db
                );
                (full_name(one), value)
            })
            .collect(),
    });
    Page {
        title: compared
            .first()
            .map_or_else(String::new, |one| one.result.study.title.clone()),
        subtitle: "Schemes side by side; the headline is that of the first in the ranking."
            .to_owned(),
        headline: best.map(|one| {
            let mut headline = headline(&one.result);
            headline.reason = format!("{}: {}", full_name(one), headline.reason);
            headline
        }),
        warnings: warnings(compared),
        figures,
        tables: tables(compared, ranks),
        facts,
        model_limits: MODEL_LIMITS.map(str::to_owned).to_vec(),
        conditions: Conditions {
            command: request.command.clone(),
            version: format!("quietedge {}", env!("CARGO_PKG_VERSION")),
            seed: compared.iter().find_map(|one| one.result.scheme().seed()),
            inputs: request.inputs.clone(),
        },
        ..Page::default()
    }
}
