//! Spectra of all schemes over each other, and efficiency over output.

use super::scheme_name;
use crate::report::check::spectrum_view;
use crate::report::figures::SpectrumCurve;
use crate::report::page::CaptionedFigure;
use crate::report::picture::{AxisSpec, Backdrop, Chart, Curve, Figure, Panel};
use crate::study::{Compared, Inverted, backoff};

/// Outputs lower than this are not drawn, dB.
const LOWEST_DB: f64 = -25.0;

/// Width of a cell of the signal's density, dB.
const CELL_DB: f64 = 0.5;

/// Spectra of all schemes without predistortion, and, where any scheme has one, with it. Those that have nothing
/// to undo are in both. Masks are at the levels of the first.
pub fn spectrum_figures(compared: &[Compared]) -> Vec<CaptionedFigure> {
    let with = compared.iter().any(|one| one.inverted == Inverted::With);
    let mut figures = vec![overlaid(compared, Inverted::Without)];
    if with {
        figures.push(overlaid(compared, Inverted::With));
    }
    figures.into_iter().flatten().collect()
}

fn overlaid(compared: &[Compared], inverted: Inverted) -> Option<CaptionedFigure> {
    let shown: Vec<&Compared> = compared
        .iter()
        .filter(|one| one.inverted == inverted || one.inverted == Inverted::Straight)
        .collect();
    let (mut view, _) = spectrum_view(&shown.first()?.result);
    let words = match inverted {
        Inverted::With => "with predistortion",
        Inverted::Without | Inverted::Straight => "without predistortion",
    };
    view.title = format!("Output spectra {words}");
    view.worst.clear();
    view.curves = shown
        .iter()
        .map(|one| {
            let spectrum = &one.result.output_spectrum;
            SpectrumCurve::in_dbm(scheme_name(one), spectrum, view.resolution_hz)
        })
        .collect();
    Some(CaptionedFigure {
        figure: view.figure(),
        caption: format!(
            "Mean output spectra of all schemes {words}; the masks stand at the levels of {}.",
            scheme_name(shown.first()?)
        ),
    })
}

/// Efficiency at constant output over back-off from each scheme's full output, the signal's density behind.
pub fn backoff_figure(compared: &[Compared]) -> CaptionedFigure {
    let mut panel = Panel::new(AxisSpec::plain("efficiency", "%"), 240.0);
    // Predistortion moves along the same curve.
    let shown = compared
        .iter()
        .filter(|one| one.inverted != Inverted::With)
        .enumerate();
    for (index, one) in shown {
        let points = backoff(&one.result)
            .into_iter()
            .filter(|point| point.output_db > LOWEST_DB)
            .map(|point| (point.output_db, 100.0 * point.efficiency))
            .collect();
        panel
            .curves
            .push(Curve::numbered(index, &scheme_name(one), points));
    }
    if let Some(first) = compared.first().map(|one| &one.result) {
        let mean_db = 20.0 * (first.signal.rms * first.study.signal.level).log10();
        let cells = ((0.0 - LOWEST_DB) / CELL_DB) as usize;
        let points = (0..cells)
            .map(|cell| {
                let from_db = LOWEST_DB + CELL_DB * cell as f64;
                let above = |db: f64| first.wanted_envelope.ccdf(db - mean_db);
                let density = above(from_db) - above(from_db + CELL_DB);
                (from_db + 0.5 * CELL_DB, density.max(0.0))
            })
            .collect();
        panel.backdrops.push(Backdrop {
            name: "density of the signal".to_owned(),
            points,
        });
    }
    let description =
        "Efficiency of all schemes over back-off from full output, the density of the \
                       signal behind."
            .to_owned();
    let figure = Figure::new(
        description,
        Chart {
            title: "Efficiency over output".to_owned(),
            across: AxisSpec::plain("output below full output", "dB"),
            shades: Vec::new(),
            panels: vec![panel],
        },
    );
    CaptionedFigure {
        figure,
        caption: "Efficiency at constant output, supply modulator and driver included, over the output below each \
                  scheme's own full output; behind it, how often the wanted signal is where."
            .to_owned(),
    }
}
