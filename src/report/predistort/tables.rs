//! Before and after in rows.

use crate::drive::{Between, Spacing};
use crate::map::Control;
use crate::predistort::{LearningEnd, Table};
use crate::study::{
    CheckResult, PolynomialResult, PredistortResult, SearchEnd, SearchRow, Sweep, SweepQuantity,
};

/// Number, then what it is without, behind the table, behind the polynomial.
pub(super) fn comparison(result: &PredistortResult) -> (Vec<String>, Vec<Vec<String>>) {
    let polynomial = result
        .polynomial
        .as_ref()
        .and_then(|p| Some((p, p.after.as_ref()?)));
    let mut columns: Vec<(&str, &CheckResult)> =
        vec![("without", &result.before), ("table", &result.after)];
    if let Some((_, after)) = polynomial {
        columns.push(("polynomial", after));
    }
    let mut rows = Vec::new();
    let mut row = |name: &str, value: &dyn Fn(&CheckResult) -> String| {
        rows.push(
            std::iter::once(name.to_owned())
                .chain(columns.iter().map(|(_, check)| value(check)))
                .collect::<Vec<_>>(),
        );
    };
    row("verdict", &|check| {
        format!("{:?}", check.judgement.verdict.outcome).to_lowercase()
    });
    row("smallest margin", &|check| {
        let tightest = check
            .judgement
            .verdict
            .tightest()
            .and_then(|check| check.margin_db);
        tightest.map_or("-".to_owned(), |margin| format!("{margin:+.2} dB"))
    });
    for check in &result.before.judgement.verdict.checks {
        row(&check.name, &|result| {
            let same = result
                .judgement
                .verdict
                .checks
                .iter()
                .find(|other| other.name == check.name && other.set == check.set);
            same.and_then(|check| check.margin_db)
                .map_or("-".to_owned(), |margin| format!("{margin:+.2} dB"))
        });
    }
    row("EVM", &|check| {
        format!("{:.3} %", check.metrics.evm_percent)
    });
    row("NMSE", &|check| format!("{:.1} dB", check.metrics.nmse_db));
    for (index, pair) in result.before.metrics.acpr.iter().enumerate() {
        let name = format!(
            "ACPR at {}",
            crate::report::text::quantity(pair.offset_hz, "Hz", 4)
        );
        row(&name, &|check| {
            let pair = check.metrics.acpr.get(index);
            pair.map_or("-".to_owned(), |pair| {
                format!("{:.1} / {:.1} dB", pair.lower_db, pair.upper_db)
            })
        });
    }
    row("output power", &|check| {
        format!("{:.2} dBm", check.metrics.power_dbm)
    });
    row("efficiency", &|check| {
        check
            .metrics
            .efficiency
            .map_or("not known".to_owned(), |e| format!("{:.1} %", 100.0 * e))
    });
    let mut cost = vec![
        "multiplications a sample".to_owned(),
        "0".to_owned(),
        table_multiplications(&result.table).to_string(),
    ];
    if let Some(fit) = polynomial.and_then(|(p, _)| p.learned.fit.as_ref()) {
        cost.push(fit.polynomial.multiplications().to_string());
    }
    rows.push(cost);
    let names = std::iter::once(String::new())
        .chain(columns.iter().map(|(name, _)| (*name).to_owned()))
        .collect();
    (names, rows)
}

/// Two for `|x|^2` and two more for the lines of control and phase; the root for the magnitude, the law of a
/// companded address (a small table of its own) and the turn of the phase (an addition to the angle) are not counted.
pub(super) fn table_multiplications(table: &Table) -> usize {
    match table.lookup.between() {
        Between::Nearest => 2,
        Between::Linear => 4,
    }
}

/// The table's sizes and what became of its entries.
pub(in crate::report) fn table_rows(table: &Table) -> Vec<(String, String)> {
    let (lookup, size) = (&table.lookup, table.lookup.size());
    let own = |name: &str, value: String| (name.to_owned(), value);
    let mut rows = vec![
        own("entries", size.depth.to_string()),
        own(
            "bits",
            format!(
                "{} address, {} amplitude, {} phase; {} stored in all",
                size.address_bits,
                size.amplitude_bits,
                size.phase_bits,
                size.stored_bits()
            ),
        ),
        own(
            "spacing",
            match lookup.spacing() {
                Spacing::Magnitude => "even in magnitude".to_owned(),
                Spacing::Power => "even in power, p = m^2".to_owned(),
                Spacing::Companded { mu } => {
                    format!("companded, p = ln(1 + {mu} m) / ln(1 + {mu})")
                }
            },
        ),
        own(
            "between entries",
            match lookup.between() {
                Between::Nearest => "the nearer entry".to_owned(),
                Between::Linear => "straight lines, rounded to the words' steps".to_owned(),
            },
        ),
        own(
            "applied",
            format!(
                "{} times per sample of the signal, held in between",
                lookup.rate()
            ),
        ),
    ];
    if table.control == Control::Drive {
        rows.push(own(
            "its words are",
            "magnitudes for the law that follows it, 0 to 1".to_owned(),
        ));
    }
    if let Some(full_output_v) = table.full_output_v {
        rows.push(own(
            "output at the last entry",
            format!("{full_output_v:.4} V peak"),
        ));
    }
    for (count, state) in table.counts().rows() {
        rows.push(own(&format!("{count} entries"), state.text().to_owned()));
    }
    rows
}

fn search_row(name: &str, row: &SearchRow) -> Vec<String> {
    vec![
        name.to_owned(),
        row.size.depth.to_string(),
        row.size.amplitude_bits.to_string(),
        row.size.phase_bits.to_string(),
        row.size.address_bits.to_string(),
        row.size.stored_bits().to_string(),
        row.margin_db
            .map_or("undecided".to_owned(), |margin| format!("{margin:+.2} dB")),
    ]
}

fn spacing_word(spacing: Spacing) -> &'static str {
    match spacing {
        Spacing::Magnitude => "magnitude",
        Spacing::Power => "power",
        Spacing::Companded { .. } => "companded",
    }
}

pub(super) fn sweep_name(sweep: &Sweep) -> String {
    match sweep.quantity {
        SweepQuantity::Depth => format!("entries, {}", spacing_word(sweep.spacing)),
        SweepQuantity::AmplitudeBits => "amplitude bits".to_owned(),
        SweepQuantity::PhaseBits => "phase bits".to_owned(),
        SweepQuantity::AddressBits => "address bits".to_owned(),
    }
}

/// Every table that was tried: what was varied, entries, amplitude bits, phase bits, address bits, bits stored, margin.
pub(super) fn search_rows(result: &PredistortResult) -> Vec<Vec<String>> {
    let Some(search) = &result.search else {
        return Vec::new();
    };
    let alone = search.sweeps.iter().flat_map(|sweep| {
        sweep
            .rows
            .iter()
            .map(|row| search_row(&sweep_name(sweep), row))
    });
    alone
        .chain(
            search
                .combined
                .iter()
                .map(|row| search_row("together", row)),
        )
        .collect()
}

/// How the search ended, in a sentence.
pub(super) fn search_sentence(result: &PredistortResult) -> Option<String> {
    let search = result.search.as_ref()?;
    let size = search.table.size;
    let sizes = format!(
        "{} entries even in {}, {} amplitude, {} phase and {} address bits",
        size.depth,
        match search.table.spacing {
            Spacing::Companded { .. } => "the companded magnitude",
            spacing => spacing_word(spacing),
        },
        size.amplitude_bits,
        size.phase_bits,
        size.address_bits
    );
    let verified = result.after.judgement.verdict.tightest();
    let verified = verified
        .and_then(|check| check.margin_db)
        .map_or(String::new(), |margin| {
            format!(" Verified with finer sampling it leaves {margin:+.2} dB.")
        });
    Some(match search.end {
        SearchEnd::Found => format!(
            "{sizes}: the smallest table tried that keeps every limit with {} dB to spare.{verified}",
            search.reserve.db
        ),
        SearchEnd::OutOfReach => format!(
            "No table keeps every limit with {} dB to spare, not the finest either: {sizes} comes closest.{verified} What is left is not the table's: look at the modulator, the delays and the level.",
            search.reserve.db
        ),
    })
}

/// How the polynomial was learned.
pub(super) fn polynomial_rows(result: &PolynomialResult) -> Vec<(String, String)> {
    let learned = &result.learned;
    let own = |name: &str, value: String| (name.to_owned(), value);
    let size = learned.size;
    let cross = if size.lead() > 0 {
        format!(", cross terms {} samples to each side", size.cross)
    } else {
        String::new()
    };
    let mut rows = vec![
        own("powers of the envelope", format!("0 to {}", size.power)),
        own("lags", format!("0 to {}{cross}", size.memory)),
        own("learned from", format!("{} instants", result.instants)),
        own(
            "ended",
            match learned.end {
                LearningEnd::StoppedHelping => "a further pass did not help".to_owned(),
                LearningEnd::RanOut => "all passes were made; more may still help".to_owned(),
            },
        ),
    ];
    if let Some(words) = result.words {
        rows.push(own(
            "coefficients",
            format!(
                "{} bits each part, steps of 2^{}",
                words.bits,
                words.exponent - words.bits as i32 + 1
            ),
        ));
    }
    for pass in &learned.passes {
        let fit = match (pass.condition, pass.largest_coefficient) {
            (Some(condition), Some(largest)) => {
                format!(", condition number {condition:.2e}, largest coefficient {largest:.3}")
            }
            _ => ", without predistortion".to_owned(),
        };
        rows.push(own(
            &format!("pass {}", pass.pass),
            format!(
                "NMSE {:.1} dB, peak {:.3}{fit}",
                pass.output_nmse_db, pass.peak
            ),
        ));
    }
    if learned.fit.is_none() {
        rows.push(own(
            "result",
            "no pass bettered the plain signal: none is used".to_owned(),
        ));
    }
    rows
}

/// Every size tried by cross-validation: power, lags, terms, multiplications, NMSE held out, condition.
pub(super) fn choice_rows(result: &PolynomialResult) -> Vec<Vec<String>> {
    let Some(choice) = &result.learned.choice else {
        return Vec::new();
    };
    choice
        .candidates
        .iter()
        .map(|candidate| {
            vec![
                if candidate.size == choice.chosen {
                    "chosen".to_owned()
                } else {
                    String::new()
                },
                candidate.size.power.to_string(),
                candidate.size.memory.to_string(),
                candidate.terms.to_string(),
                candidate.multiplications.to_string(),
                format!("{:.2} dB", candidate.held_out_nmse_db),
                format!("{:.1e}", candidate.condition),
            ]
        })
        .collect()
}
