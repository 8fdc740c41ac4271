//! Spectrum, constellation, clouds and distribution of a capture.

use crate::metrics::Spectrum;
use crate::report::figures::{
    CcdfCurve, CcdfFigure, CloudFigure, ConstellationFigure, SpectrumCurve,
};
use crate::report::held::{HeldSpectrum, narrowest};
use crate::report::page::CaptionedFigure;
use crate::report::text::quantity;
use crate::signal::Modulation;
use crate::study::MeasureResult;
use crate::units;

pub(super) fn figures(result: &MeasureResult) -> Vec<CaptionedFigure> {
    let mut figures = vec![measured_spectrum_figure(result)];
    figures.extend(constellation_figure(result));
    figures.extend(cloud_figures(result));
    let mut curves = vec![CcdfCurve {
        name: "capture".to_owned(),
        points: result.envelope.ccdf_points(0.1),
    }];
    if let Some(envelope) = &result.reference_envelope {
        curves.push(CcdfCurve {
            name: "reference".to_owned(),
            points: envelope.ccdf_points(0.1),
        });
    }
    figures.push(CaptionedFigure {
        figure: CcdfFigure {
            title: "Distribution of power".to_owned(),
            curves,
        }
        .figure(),
        caption: "How much of the time the power lies above its mean by how much (CCDF)."
            .to_owned(),
    });
    figures
}

/// The spectrum in the narrowest measuring bandwidth of the masks, in dBm where the scale is known, else
/// against full scale.
pub fn measured_spectrum_figure(result: &MeasureResult) -> CaptionedFigure {
    let lines = &result.judgement.lines;
    let resolution_hz = narrowest(lines).map_or(result.spectrum.enbw_hz, |line| line.bandwidth_hz);
    // Without a scale masks were judged at a mean power of 0 dBm, and curves count from full scale.
    let known = result.metrics.power_dbm.is_some();
    let (unit, curve_offset, line_offset) = if known {
        ("dBm", 30.0, 0.0)
    } else {
        ("dB against full scale", 0.0, result.metrics.power_dbfs)
    };
    let curve = |name: &str, spectrum: &Spectrum| SpectrumCurve {
        name: name.to_owned(),
        points: spectrum
            .mean_w_per_hz
            .iter()
            .enumerate()
            .map(|(bin, density)| {
                (
                    spectrum.offset_hz(bin),
                    units::db(density * resolution_hz) + curve_offset,
                )
            })
            .collect(),
    };
    let mut curves = vec![curve("capture", &result.spectrum)];
    if let Some(sent) = &result.reference_spectrum {
        curves.push(curve("reference", sent));
    }
    let figure = HeldSpectrum {
        lines,
        margins: &result.metrics.mask,
        acpr: &result.metrics.acpr,
        occupied_hz: result.metrics.occupied_hz,
        range_hz: result.spectrum.range_hz().1,
        resolution_hz,
        offset_db: line_offset,
    }
    .figure("Spectrum", unit, curves)
    .figure();
    let caption = format!(
        "Mean levels in {}{}.",
        quantity(resolution_hz, "Hz", 4),
        if lines.is_empty() {
            ""
        } else {
            "; lines of masks with other bandwidths are moved as noise would be"
        }
    );
    CaptionedFigure { figure, caption }
}

/// Received points, where the format is known.
fn constellation_figure(result: &MeasureResult) -> Option<CaptionedFigure> {
    let (symbols, format) = (result.symbols.as_ref()?, result.request.format?);
    let modulation = format.modulation();
    let mut sent: Vec<_> = (0..1u32 << modulation.bits())
        .map(|word| modulation.point(word))
        .collect();
    if modulation == Modulation::Pi4Dqpsk {
        let turn = num_complex::Complex64::cis(std::f64::consts::FRAC_PI_4);
        sent.extend(sent.clone().iter().map(|point| point * turn));
    }
    let figure = ConstellationFigure {
        title: "Constellation".to_owned(),
        received: symbols.constellation.clone(),
        sent,
    }
    .figure();
    Some(CaptionedFigure {
        figure,
        caption: format!(
            "Received points over their gain; EVM {:.3} % RMS of {} points.",
            symbols.evm_percent, symbols.points
        ),
    })
}

/// Amplitude over amplitude and phase over amplitude.
fn cloud_figures(result: &MeasureResult) -> Vec<CaptionedFigure> {
    let Some(bend) = &result.bend else {
        return Vec::new();
    };
    let amplitude = CloudFigure {
        title: "Amplitude over amplitude (AM-AM)".to_owned(),
        across: "reference amplitude, share of full scale".to_owned(),
        up: "capture's amplitude over the gain".to_owned(),
        samples: bend.pairs.iter().map(|pair| (pair[0], pair[1])).collect(),
        line: bend
            .map
            .iter()
            .map(|point| (point.amplitude, point.output))
            .collect(),
        line_name: "static map, never falling".to_owned(),
    };
    // Close to zero amplitude phases are noise.
    let least = 0.05 * bend.map.last().map_or(0.0, |point| point.amplitude);
    let phase = CloudFigure {
        title: "Phase over amplitude (AM-PM)".to_owned(),
        across: "reference amplitude, share of full scale".to_owned(),
        up: "capture's phase, degrees".to_owned(),
        samples: bend
            .pairs
            .iter()
            .filter(|pair| pair[0] > least)
            .map(|pair| (pair[0], pair[2]))
            .collect(),
        line: bend
            .map
            .iter()
            .filter(|point| point.amplitude > least)
            .map(|point| (point.amplitude, point.phase_deg))
            .collect(),
        line_name: "static map".to_owned(),
    };
    vec![
        CaptionedFigure {
            figure: amplitude.figure(),
            caption: format!(
                "The map explains all but {:.1} dB of the power; what lies beside it is memory and noise.",
                bend.static_rest_db
            ),
        },
        CaptionedFigure {
            figure: phase.figure(),
            caption: "Phase against the linear gain's; amplitudes below 5 % are left out."
                .to_owned(),
        },
    ]
}
