//! The figures of a check besides its spectrum.

use super::spectrum::spectrum_figure;
use crate::map::Control;
use crate::report::figures::{
    BendCurve, BendFigure, CcdfCurve, CcdfFigure, EnvelopeCurve, EnvelopeFigure, Quantity,
    ShapeCurve, ShapesFigure,
};
use crate::report::page::CaptionedFigure;
use crate::report::picture::Figure;
use crate::report::stage::{control_quantity, phases_deg, waveform_figure};
use crate::report::text::quantity;
use crate::study::{CheckResult, Hardware, Shape};

pub(super) fn figures(result: &CheckResult) -> Vec<CaptionedFigure> {
    let mut figures = vec![
        spectrum_figure(result),
        bend_figure(result),
        notch_figure(result),
        ccdf_figure(result),
    ];
    if let (Some(facts), Hardware::Stage(stage)) = (&result.stage, &result.study.hardware) {
        figures.push(CaptionedFigure {
            figure: waveform_figure(stage, &facts.waveform),
            caption: "One period of the stage at full supply and width, from the instant its switch closes."
                .to_owned(),
        });
        figures.extend(shapes_figure(&facts.shapes));
    }
    figures
}

/// The drain's waveform where the signal takes the stage.
fn shapes_figure(shapes: &[Shape]) -> Option<CaptionedFigure> {
    let first = shapes.first()?;
    let control = first.control;
    let name_of = |shape: &Shape| match control {
        Control::Supply => format!("{}, {}", shape.place, quantity(shape.value, "V", 3)),
        Control::Angle => format!("{}, {:.1} deg", shape.place, shape.value.to_degrees()),
        Control::Width | Control::Drive => {
            format!(
                "{}, {:.2} % of the period",
                shape.place,
                100.0 * shape.value
            )
        }
    };
    let (mut curves, mut missing) = (Vec::new(), String::new());
    for shape in shapes {
        match &shape.waveform {
            Ok(waveform) => curves.push(ShapeCurve {
                name: name_of(shape),
                time_s: waveform.time_s.clone(),
                drain_v: waveform.drain_v.clone(),
                supply_v: shape.supply_v,
            }),
            Err(reason) => missing.push_str(&format!(" None at {}: {reason}.", name_of(shape))),
        }
    }
    let said = match control {
        Control::Supply => {
            "One period at full, half and lowest supply that the scheme asks for; below, each over its supply. A stage \
             without curvature, coupling or diode shows one curve there."
        }
        Control::Angle => {
            "One period of the first branch at full output, at 45 degrees and at a quarter turn; below, over the supply."
        }
        Control::Width | Control::Drive => {
            "One period at full, half and lowest pulse width; below, over the supply."
        }
    };
    Some(CaptionedFigure {
        figure: ShapesFigure {
            title: format!("Drain voltage over the {}", control.name()),
            curves,
        }
        .figure(),
        caption: format!("{said}{missing}"),
    })
}

/// AM-AM and AM-PM with the signal's density.
pub fn bend_figure(result: &CheckResult) -> CaptionedFigure {
    let map = &result.map;
    let points = map.points();
    let full = result.study.full_control();
    let floor = result.scheme().floor();
    let control = map.control().name();
    let bins = result.control_density.len() as f64;
    let figure = BendFigure {
        title: format!("Output over {control}"),
        control: control_quantity(map.control()),
        curves: vec![BendCurve {
            name: "map".to_owned(),
            control: points
                .iter()
                .map(|point| map.control().shown(point.control))
                .collect(),
            amplitude_v: points.iter().map(|point| point.output_v.norm()).collect(),
            phase_deg: phases_deg(map),
        }],
        density: result
            .control_density
            .iter()
            .enumerate()
            .map(|(bin, &part)| {
                let control = (bin as f64 + 0.5) / bins * full;
                (map.control().shown(control), part)
            })
            .collect(),
        floor: (floor > 0.0).then_some(floor * full),
    }
    .figure();
    let caption = format!(
        "How output amplitude and phase follow the {control}, and how often the signal's {control} is where."
    );
    CaptionedFigure { figure, caption }
}

/// The envelope against the supply track.
pub fn notch_figure(result: &CheckResult) -> CaptionedFigure {
    let notch = &result.notch;
    let supply = result.map.control() == Control::Supply;
    // Other controls are shown as parts of their range, beside the wanted part of full output.
    let full = if supply {
        result.study.full_control()
    } else {
        1.0
    };
    let curve = |name: &str, values: &[f64]| EnvelopeCurve {
        name: name.to_owned(),
        time_s: notch.time_s.clone(),
        value: values.iter().map(|value| value * full).collect(),
    };
    let figure = EnvelopeFigure {
        title: if supply {
            "Envelope and supply around the deepest notch".to_owned()
        } else {
            format!(
                "Envelope and {} around the deepest notch",
                result.map.control().name()
            )
        },
        quantity: if supply {
            Quantity::new("supply", "V")
        } else {
            Quantity::new("part of full range", "")
        },
        curves: vec![
            curve("wanted envelope", &notch.wanted),
            curve(
                if supply {
                    "asked of the modulator"
                } else {
                    "asked"
                },
                &notch.asked,
            ),
            curve("at the stage", &notch.control),
        ],
    }
    .figure();
    let caption = if supply {
        "The wanted envelope, what the shaping makes of it, and what the modulator delivers, around the signal's deepest notch."
    } else {
        "The wanted envelope and the control, asked for and at the stage, around the signal's deepest notch."
    };
    CaptionedFigure {
        figure,
        caption: caption.to_owned(),
    }
}

/// Complementary distributions of output and wanted power.
pub fn ccdf_figure(result: &CheckResult) -> CaptionedFigure {
    let curve = |name: &str, envelope: &crate::metrics::EnvelopeFigures| CcdfCurve {
        name: name.to_owned(),
        points: envelope.ccdf_points(0.1),
    };
    let figure: Figure = CcdfFigure {
        title: "Distribution of power".to_owned(),
        curves: vec![
            curve("output", &result.output_envelope),
            curve("wanted", &result.wanted_envelope),
        ],
    }
    .figure();
    let caption =
        "How much of the time the power lies above its mean by how much (CCDF).".to_owned();
    CaptionedFigure { figure, caption }
}
