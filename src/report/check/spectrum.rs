//! The spectrum of a check against its masks.

use crate::limits::Detector;
use crate::report::figures::{SpectrumCurve, SpectrumFigure};
use crate::report::held::{HeldSpectrum, narrowest, tightest};
use crate::report::page::CaptionedFigure;
use crate::report::text::quantity;
use crate::study::{By, CheckResult};
use crate::units;

/// The spectrum in the narrowest measuring bandwidth of the masks, with its detector.
pub fn spectrum_figure(result: &CheckResult) -> CaptionedFigure {
    let (view, caption) = spectrum_view(result);
    CaptionedFigure {
        figure: view.figure(),
        caption,
    }
}

/// What the spectrum's picture shows, and its caption.
pub(in crate::report) fn spectrum_view(result: &CheckResult) -> (SpectrumFigure, String) {
    let lines = &result.judgement.lines;
    let worst = tightest(&result.metrics.mask);
    let shown = narrowest(lines);
    let resolution_hz = shown.map_or(result.output_spectrum.enbw_hz, |line| line.bandwidth_hz);
    let peak = shown
        .filter(|line| line.detector == Detector::PeakHold)
        .and_then(|line| {
            result.peak_spectra.iter().min_by(|a, b| {
                let off = |spectrum: &crate::metrics::Spectrum| {
                    (spectrum.enbw_hz - line.bandwidth_hz).abs()
                };
                off(a).total_cmp(&off(b))
            })
        });
    let mut curves = Vec::new();
    if let Some((spectrum, densities)) =
        peak.and_then(|spectrum| Some((spectrum, spectrum.peak_w_per_hz.as_ref()?)))
    {
        curves.push(SpectrumCurve {
            name: "output, peak hold".to_owned(),
            points: densities
                .iter()
                .enumerate()
                .map(|(bin, density)| {
                    (
                        spectrum.offset_hz(bin),
                        units::dbm_from_watt(density * spectrum.enbw_hz),
                    )
                })
                .collect(),
        });
    }
    let mean = if curves.is_empty() {
        "output"
    } else {
        "output, mean"
    };
    curves.push(SpectrumCurve::in_dbm(
        mean,
        &result.output_spectrum,
        resolution_hz,
    ));
    if let Some(facts) = &result.replay
        && facts.by == By::Both
    {
        curves.push(SpectrumCurve::in_dbm(
            "output by map",
            &facts.map.output_spectrum,
            resolution_hz,
        ));
    }
    curves.push(SpectrumCurve::in_dbm(
        "wanted",
        &result.wanted_spectrum,
        resolution_hz,
    ));

    let view = HeldSpectrum {
        lines,
        margins: &result.metrics.mask,
        acpr: &result.metrics.acpr,
        occupied_hz: result.metrics.occupied_hz,
        range_hz: result.output_spectrum.range_hz().1,
        resolution_hz,
        offset_db: 0.0,
    }
    .figure("Output spectrum", "dBm", curves);
    let caption = match worst {
        Some(worst) => format!(
            "Levels in {}, the narrowest bandwidth that a mask asks for. The tightest point lies {} from the carrier; lines of masks with other bandwidths are moved as noise would be.",
            quantity(resolution_hz, "Hz", 4),
            quantity(worst.worst_hz, "Hz", 4)
        ),
        None => format!(
            "Levels in {}. No mask was asked for.",
            quantity(resolution_hz, "Hz", 4)
        ),
    };
    (view, caption)
}
