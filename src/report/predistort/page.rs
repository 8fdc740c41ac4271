//! The report's page, its figures and the text for the terminal.

use super::lookup::lookup_figure;
use super::tables::{
    choice_rows, comparison, polynomial_rows, search_rows, search_sentence, sweep_name, table_rows,
};
use crate::report::check::{Request, headline, page as check_page, spectrum_view};
use crate::report::figures::{MarginCurve, MarginFigure, SpectrumCurve};
use crate::report::page::{CaptionedFigure, DataTable, FactGroup, Page};
use crate::report::table::{Align, Table};
use crate::study::{PredistortResult, SweepQuantity};

/// What the predistortion leaves out.
const MODEL_LIMITS: [&str; 3] = [
    "The table is made from the same map that verifies it: a real stage differs from its map, drifts and ages, and \
     its table will do less than this one.",
    "Table and polynomial sample the signal on their own clock, behind the delays that align both paths, and hold \
     their output. The images of that hold are part of the output; a path without a bandwidth of its own leaves \
     them as they are.",
    "A static table does not undo memory: what the modulator's bandwidth and the delays do stays.",
];

/// The report's page: the verdict behind the table first.
pub fn page(result: &PredistortResult, request: &Request) -> Page {
    let mut page = check_page(&result.after, request);
    let (columns, rows) = comparison(result);
    page.title = format!("{}: predistorted", page.title);
    page.headline = Some(headline(&result.after));
    if let Some(first) = page.figures.first_mut() {
        *first = spectra_figure(result);
    }
    let at = page.figures.len().min(1);
    page.figures.insert(at, table_figure(result));
    if let Some(figure) = margin_figure(result) {
        page.figures.insert(at + 1, figure);
    }
    let right = |name: &str| (name.to_owned(), Align::Right);
    let left = |name: &str| (name.to_owned(), Align::Left);
    let mut tables = vec![DataTable {
        title: "Before and after".to_owned(),
        columns: columns
            .iter()
            .map(|name| {
                if name.is_empty() {
                    left("")
                } else {
                    right(name)
                }
            })
            .collect(),
        rows,
    }];
    let search = search_rows(result);
    if !search.is_empty() {
        tables.push(DataTable {
            title: "Tables tried".to_owned(),
            columns: vec![
                left("varied"),
                right("entries"),
                right("amplitude bits"),
                right("phase bits"),
                right("address bits"),
                right("bits stored"),
                right("smallest margin"),
            ],
            rows: search,
        });
    }
    let mut facts = Vec::new();
    if let Some(polynomial) = &result.polynomial {
        facts.push(FactGroup {
            title: "Polynomial".to_owned(),
            rows: polynomial_rows(polynomial),
        });
        let choice = choice_rows(polynomial);
        if !choice.is_empty() {
            tables.push(DataTable {
                title: "Polynomials tried by cross-validation".to_owned(),
                columns: vec![
                    left("size"),
                    right("highest power"),
                    right("lags"),
                    right("terms"),
                    right("multiplications"),
                    right("NMSE held out"),
                    right("condition"),
                ],
                rows: choice,
            });
        }
    }
    tables.append(&mut page.tables);
    facts.append(&mut page.facts);
    (page.tables, page.facts) = (tables, facts);
    page.model_limits.extend(MODEL_LIMITS.map(str::to_owned));
    page
}

/// Spectra before and after.
pub fn spectra_figure(result: &PredistortResult) -> CaptionedFigure {
    let (mut view, caption) = spectrum_view(&result.after);
    view.title = "Output spectrum, before and after".to_owned();
    let peak_hold = view.curves.len() > 2;
    let (before, _) = spectrum_view(&result.before);
    // The same kind of reading as the first curve, in the resolution of this picture.
    let curve = if peak_hold {
        before.curves.into_iter().next().map(|mut curve| {
            curve.name = "before, peak hold".to_owned();
            curve
        })
    } else {
        Some(SpectrumCurve::in_dbm(
            "before",
            &result.before.output_spectrum,
            view.resolution_hz,
        ))
    };
    let at = view.curves.len().min(1);
    view.curves.extend(curve);
    if at < view.curves.len() {
        view.curves[at..].rotate_right(1);
    }
    CaptionedFigure {
        figure: view.figure(),
        caption: format!("{caption} The output is that behind the table."),
    }
}

/// The table's words beside the exact inverse.
pub fn table_figure(result: &PredistortResult) -> CaptionedFigure {
    lookup_figure(&result.table)
}

/// Margin over depth and bits, where they were searched.
pub fn margin_figure(result: &PredistortResult) -> Option<CaptionedFigure> {
    let search = result.search.as_ref()?;
    let curves = search
        .sweeps
        .iter()
        .map(|sweep| MarginCurve {
            name: sweep_name(sweep),
            points: sweep
                .rows
                .iter()
                .filter_map(|row| {
                    let bits = match sweep.quantity {
                        SweepQuantity::Depth => (row.size.depth as f64).log2(),
                        SweepQuantity::AmplitudeBits => f64::from(row.size.amplitude_bits),
                        SweepQuantity::PhaseBits => f64::from(row.size.phase_bits),
                        SweepQuantity::AddressBits => f64::from(row.size.address_bits),
                    };
                    Some((bits, row.margin_db?))
                })
                .collect(),
        })
        .collect();
    let figure = MarginFigure {
        title: "Margin over the table's size".to_owned(),
        curves,
        reserve_db: search.reserve.db,
    }
    .figure();
    let caption = format!(
        "One quantity varied at a time, the others at their finest. {}",
        search_sentence(result).unwrap_or_default()
    );
    Some(CaptionedFigure { figure, caption })
}

/// The result for the terminal: verdict first.
pub fn text(result: &PredistortResult) -> String {
    let word = check_word(result);
    let mut text = format!("{word}: {}, behind the table\n", result.after.study.title);
    let (columns, rows) = comparison(result);
    let mut table = Table::new(columns.into_iter().enumerate().map(|(index, name)| {
        (
            name,
            if index == 0 {
                Align::Left
            } else {
                Align::Right
            },
        )
    }));
    for row in rows {
        table.row(row);
    }
    text.push_str(&format!("\nBefore and after\n{}\n", table.text()));
    let pairs = |title: &str, rows: Vec<(String, String)>| {
        let mut table = Table::new([("", Align::Left), ("", Align::Left)]);
        for (name, value) in rows {
            table.row([name, value]);
        }
        format!("\n{title}\n{}\n", table.text())
    };
    text.push_str(&pairs("Table", table_rows(&result.table)));
    if let Some(sentence) = search_sentence(result) {
        let mut table = Table::new([
            ("varied", Align::Left),
            ("entries", Align::Right),
            ("amplitude", Align::Right),
            ("phase", Align::Right),
            ("address", Align::Right),
            ("bits stored", Align::Right),
            ("margin", Align::Right),
        ]);
        for row in search_rows(result) {
            table.row(row);
        }
        text.push_str(&format!("\nTables tried\n{}\n{sentence}\n", table.text()));
    }
    if let Some(polynomial) = &result.polynomial {
        text.push_str(&pairs("Polynomial", polynomial_rows(polynomial)));
    }
    if !result.after.warnings.is_empty() {
        text.push_str("\nWarnings\n");
        for warning in &result.after.warnings {
            text.push_str(&format!("- {warning}\n"));
        }
    }
    text.push_str(
        "\nAn estimate from a model, no type approval. High voltages and RF burns: dummy load first; a licence is needed to transmit.",
    );
    text
}

fn check_word(result: &PredistortResult) -> String {
    format!("{:?}", result.after.judgement.verdict.outcome).to_uppercase()
}
