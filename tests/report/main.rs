//! The report from outside: pictures parse, hold their labels, stay small and survive any data;
//! the page is self-contained and escapes everything.

mod samples;

use proptest::prelude::*;
use quietedge::report::Figure;
use quietedge::report::figures::*;
use quietedge::report::page::*;
use quietedge::report::table::Align;

/// Parses `figure` and returns its texts.
fn texts(figure: &Figure) -> Vec<String> {
    let svg = figure.svg().expect("the figure can be drawn");
    let document = roxmltree::Document::parse(&svg).expect("the picture is XML");
    for number in ["NaN", "inf"] {
        let found = document
            .descendants()
            .filter(roxmltree::Node::is_element)
            .flat_map(|node| {
                node.attributes()
                    .map(|a| (a.name().to_owned(), a.value().to_owned()))
                    .collect::<Vec<_>>()
            })
            .find(|(name, value)| {
                ["points", "x", "y", "cx", "cy"].contains(&name.as_str()) && value.contains(number)
            });
        assert_eq!(found, None);
    }
    assert!(!svg.contains("#01"), "a stand-in colour was left");
    document
        .descendants()
        .filter(|node| node.has_tag_name(("http://www.w3.org/2000/svg", "text")))
        .filter_map(|node| node.text().map(str::to_owned))
        .collect()
}

#[track_caller]
fn has(texts: &[String], wanted: &str) {
    assert!(
        texts.iter().any(|text| text == wanted),
        "no \"{wanted}\" in {texts:?}"
    );
}

#[test]
fn figures_hold_their_labels() {
    let spectrum = texts(&samples::spectrum().figure());
    for wanted in [
        "margin -9.4 dB at +12.5 kHz",
        "Output spectrum, dBm in 100 Hz",
        "offset from the carrier, kHz",
        "output",
        "wanted",
        "mask D",
        "-20",
        "20",
    ] {
        has(&spectrum, wanted);
    }
    let waveform = texts(&samples::waveform().figure());
    for wanted in [
        "drain voltage, V",
        "switch current, A",
        "load voltage, V",
        "time, ns",
        "switch closed",
        "peak 2.4 A",
    ] {
        has(&waveform, wanted);
    }
    let bend = texts(&samples::bend().figure());
    for wanted in [
        "AM-AM: output amplitude, V",
        "AM-PM: output phase, deg",
        "density of the signal",
        "below the floor",
        "supply, V",
    ] {
        has(&bend, wanted);
    }
    let ccdf = texts(&samples::ccdf().figure());
    for wanted in [
        "share of time above, %",
        "complex Gaussian noise",
        "0.1",
        "100",
    ] {
        has(&ccdf, wanted);
    }
    has(&texts(&samples::envelope().figure()), "time, ms");
    has(&texts(&samples::map().figure()), "efficiency, %");
    has(
        &texts(&samples::mask().figure()),
        "dB relative to the unmodulated carrier, in 100 Hz",
    );
    has(&texts(&samples::cloud().figure()), "static map");
}

#[test]
fn pictures_stay_small() {
    for (name, figure, _) in samples::figures() {
        let svg = figure.svg().unwrap();
        assert!(svg.len() < 150_000, "{name}: {} bytes", svg.len());
    }
    // A spectrum of a million bins is no larger than the pixels can show.
    let mut long = samples::spectrum();
    long.curves[0].points = (0..1_000_000)
        .map(|bin| {
            (
                f64::from(bin) - 5e5,
                f64::from(bin % 1000 * 7919 % 1000) / 10.0 - 80.0,
            )
        })
        .collect();
    let size = long.figure().svg().unwrap().len();
    assert!(size < 150_000, "{size} bytes");
}

#[test]
fn pictures_take_their_colours_from_the_surroundings() {
    let svg = samples::spectrum().figure().svg().unwrap();
    assert!(svg.contains("prefers-color-scheme:dark") && svg.contains("var(--ink)"));
    let page = samples::page().html().unwrap();
    assert_eq!(page.matches("prefers-color-scheme:dark").count(), 1);
}

#[test]
fn png_pictures_are_whole() {
    for figure in [samples::spectrum().figure(), samples::waveform().figure()] {
        let bytes = figure.png().unwrap();
        let mut reader = png::Decoder::new(&bytes[..]).read_info().unwrap();
        let mut pixels = vec![0; reader.output_buffer_size()];
        let info = reader.next_frame(&mut pixels).unwrap();
        assert_eq!(info.width, 1440);
        let ink = pixels
            .chunks_exact(3)
            .filter(|rgb| rgb.iter().all(|c| *c < 90))
            .count();
        assert!(ink > 1_000, "text and lines are there: {ink} dark pixels");
        assert!(bytes.len() < 400_000, "{} bytes", bytes.len());
    }
}

/// Figures from the same odd numbers.
fn odd_figures(title: &str, points: &[(f64, f64)]) -> Vec<Figure> {
    let (across, up): (Vec<f64>, Vec<f64>) = points.iter().copied().unzip();
    let first = points.first().copied().unwrap_or((f64::NAN, f64::INFINITY));
    let title = title.to_owned();
    let line = MaskLine {
        name: title.clone(),
        points: points.to_vec(),
    };
    vec![
        WaveformFigure {
            title: title.clone(),
            time_s: across.clone(),
            drain_v: up.clone(),
            switch_a: across.clone(),
            load_v: up.clone(),
            others: Vec::new(),
            closed_s: points.to_vec(),
            peak_drain: Some(first),
            peak_current: None,
        }
        .figure(),
        SpectrumFigure {
            title: title.clone(),
            level_unit: title.clone(),
            resolution_hz: first.0,
            curves: vec![SpectrumCurve {
                name: title.clone(),
                points: points.to_vec(),
            }],
            masks: vec![line.clone()],
            worst: vec![WorstPoint {
                offset_hz: first.0,
                level: first.1,
                margin_db: first.1,
            }],
            span_hz: Some(first.1),
        }
        .figure(),
        BendFigure {
            title: title.clone(),
            control: Quantity::new(title.clone(), "V"),
            curves: vec![BendCurve {
                name: title.clone(),
                control: across.clone(),
                amplitude_v: up.clone(),
                phase_deg: across.clone(),
            }],
            density: points.to_vec(),
            floor: Some(first.1),
        }
        .figure(),
        EnvelopeFigure {
            title: title.clone(),
            quantity: Quantity::new("x", title.clone()),
            curves: vec![EnvelopeCurve {
                name: title.clone(),
                time_s: across.clone(),
                value: up.clone(),
            }],
        }
        .figure(),
        CcdfFigure {
            title: title.clone(),
            curves: vec![CcdfCurve {
                name: title.clone(),
                points: points.to_vec(),
            }],
        }
        .figure(),
        MapFigure {
            title: title.clone(),
            control: Quantity::new("width", ""),
            control_values: across.clone(),
            amplitude_v: up.clone(),
            phase_deg: up.clone(),
            efficiency: across,
            switch_peak_v: up,
        }
        .figure(),
        MaskFigure {
            title: title.clone(),
            level_axis: title.clone(),
            lines: vec![line],
        }
        .figure(),
        CloudFigure {
            title: title.clone(),
            across: title.clone(),
            up: title.clone(),
            samples: points.to_vec(),
            line: points.to_vec(),
            line_name: title,
        }
        .figure(),
    ]
}

#[test]
fn empty_constant_and_endless_data_are_drawn() {
    for points in [
        vec![],
        vec![(0.0, 0.0)],
        vec![(1.0, 5.0); 3],
        vec![(f64::NAN, f64::NAN), (f64::INFINITY, f64::NEG_INFINITY)],
        vec![
            (f64::MIN, f64::MAX),
            (f64::MAX, f64::MIN),
            (5e-324, -5e-324),
        ],
        vec![
            (0.0, 1.0),
            (f64::NAN, 2.0),
            (1.0, f64::INFINITY),
            (2.0, 3.0),
        ],
    ] {
        for figure in odd_figures("odd", &points) {
            has(
                &texts(&figure),
                if figure.title() == "odd" {
                    "odd"
                } else {
                    figure.title()
                },
            );
        }
    }
    let figure = &odd_figures("", &[])[1];
    assert!(!figure.png().unwrap().is_empty());
}

proptest! {
    #![proptest_config(ProptestConfig::with_cases(24))]

    #[test]
    fn any_numbers_and_texts_make_a_picture(
        title in any::<String>(),
        points in prop::collection::vec((prop::num::f64::ANY, prop::num::f64::ANY), 0..12),
    ) {
        for figure in odd_figures(&title, &points) {
            texts(&figure);
        }
    }

    #[test]
    fn no_text_becomes_markup(text in "(<script>|</style>|\"|'|&|\\]\\]>|<!--|javascript:|[a-z<>&'\"]| |\\PC){0,12}") {
        let page = hostile(&text).html().unwrap();
        let plain = hostile("x").html().unwrap();
        for mark in ["<", ">", "\"", "<script", "<a ", "<img", "<!--"] {
            prop_assert_eq!(page.matches(mark).count() , plain.matches(mark).count(), "{}", mark);
        }
    }
}

/// A page that says `text` everywhere.
fn hostile(text: &str) -> Page {
    let text = || format!("a{text}b");
    let figure = samples::mask();
    Page {
        title: text(),
        subtitle: text(),
        headline: Some(Headline {
            outcome: Outcome::Undecided,
            reason: text(),
            margin_db: Some(f64::NAN),
        }),
        checks: vec![CheckRow {
            name: text(),
            outcome: Outcome::Outside,
            found: text(),
            allowed: text(),
            margin_db: Some(f64::INFINITY),
            reason: text(),
        }],
        warnings: vec![text()],
        key_figures: vec![KeyFigure {
            name: text(),
            value: text(),
            note: text(),
        }],
        figures: vec![CaptionedFigure {
            figure: MaskFigure {
                title: "m".to_owned(),
                level_axis: text(),
                lines: figure.lines,
            }
            .figure(),
            caption: text(),
        }],
        tables: vec![DataTable {
            title: text(),
            columns: vec![(text(), Align::Left), (text(), Align::Right)],
            rows: vec![vec![text()], vec![text(); 3]],
        }],
        facts: vec![FactGroup {
            title: text(),
            rows: vec![(text(), text())],
        }],
        model_limits: vec![text()],
        conditions: Conditions {
            command: text(),
            version: text(),
            seed: None,
            inputs: vec![(text(), text())],
        },
    }
}

#[test]
fn the_page_stands_alone() {
    let page = samples::page().html().unwrap();
    let rest = page
        .replace("xmlns=\"http://www.w3.org/2000/svg\"", "")
        .replace("http-equiv=", "");
    for reference in [
        "http", "src=", "href=", "@import", "url(", "<script", "<link",
    ] {
        assert!(!rest.contains(reference), "{reference}");
    }
    assert!(page.contains("default-src 'none'"));
    assert!(page.contains("<html lang=\"en\">"));
    assert_eq!(
        page.matches("role=\"img\" aria-label=").count(),
        2 * samples::figures().len()
    );
    let at = |text: &str| page.find(text).unwrap_or_else(|| panic!("no {text}"));
    assert!(at("Outside the limits") < at("Key figures") && at("by 9.4 dB") < at("<figure>"));
    assert!(at("Dummy load first") < at("seed 7"));
}

#[test]
fn the_same_data_give_the_same_bytes() {
    assert_eq!(
        samples::page().html().unwrap(),
        samples::page().html().unwrap()
    );
}

/// Writes the page and the pictures of the invented data, to look at:
/// `cargo test --test report -- --ignored` writes into `quietedge-report` in the temporary folder.
#[test]
#[ignore = "writes files to look at"]
fn write_samples() {
    let folder = std::env::temp_dir().join("quietedge-report");
    std::fs::create_dir_all(&folder).unwrap();
    std::fs::write(folder.join("page.html"), samples::page().html().unwrap()).unwrap();
    for (name, figure, _) in samples::figures() {
        std::fs::write(folder.join(format!("{name}.svg")), figure.svg().unwrap()).unwrap();
        std::fs::write(folder.join(format!("{name}.png")), figure.png().unwrap()).unwrap();
    }
}
