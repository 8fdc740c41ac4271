//! The sections of the page.

use std::fmt::Write as _;

use super::{CaptionedFigure, CheckRow, Conditions, FactGroup, Headline, KeyFigure};
use crate::report::error::ReportError;
use crate::report::text::{escape, escape_lines, keep_units};

/// Margins beyond this many dB reach the end of the gauge.
const GAUGE_DB: f64 = 20.0;

/// The verdict.
pub(super) fn headline(headline: &Headline) -> String {
    let mut html = format!(
        "<div class=\"verdict {}\">\n<p class=\"outcome\">{}",
        headline.outcome.word(),
        headline.outcome.sentence()
    );
    if let Some(margin) = headline.margin_db.filter(|margin| margin.is_finite()) {
        let _ = write!(html, "<span class=\"by\">{}</span>", spare(margin));
    }
    let _ = write!(
        html,
        "</p>\n<p>{}</p>\n</div>\n",
        escape(&keep_units(&headline.reason))
    );
    html
}

fn spare(margin_db: f64) -> String {
    if margin_db < 0.0 {
        format!(" by {:.1} dB", -margin_db)
    } else {
        format!(", {margin_db:.1} dB to spare")
    }
}

/// A section with a list; nothing where the list is empty.
pub(super) fn list<'a>(id: &str, title: &str, items: impl Iterator<Item = &'a str>) -> String {
    let items: String = items
        .map(|item| match item.split_once(": ") {
            // Cautions begin with their subject.
            Some((subject, rest)) if id == "cautions" => format!(
                "<li><strong>{}:</strong> {}</li>\n",
                escape(subject),
                escape(rest)
            ),
            _ => format!("<li>{}</li>\n", escape(&keep_units(item))),
        })
        .collect();
    if items.is_empty() {
        return String::new();
    }
    format!(
        "<section class=\"{id}\" aria-labelledby=\"{id}\">\n<h2 id=\"{id}\">{}</h2>\n<ul>\n{items}</ul>\n</section>\n",
        escape(title)
    )
}

/// The table of checks. Roles are written out because narrow screens show rows as blocks.
pub(super) fn checks(checks: &[CheckRow]) -> String {
    if checks.is_empty() {
        return String::new();
    }
    let mut html = String::from(
        "<section aria-labelledby=\"checks\">\n<h2 id=\"checks\">Checks</h2>\n\
         <table role=\"table\" class=\"checks\" aria-labelledby=\"checks\">\n<thead role=\"rowgroup\">\n<tr role=\"row\">",
    );
    for header in ["Check", "Outcome", "Found", "Allowed", "Margin"] {
        let _ = write!(
            html,
            "<th role=\"columnheader\" scope=\"col\">{header}</th>"
        );
    }
    html += "</tr>\n</thead>\n<tbody role=\"rowgroup\">\n";
    for check in checks {
        let reason = if check.reason.is_empty() {
            String::new()
        } else {
            format!("<span class=\"reason\">{}</span>", escape(&check.reason))
        };
        let word = check.outcome.word();
        let _ = writeln!(
            html,
            "<tr role=\"row\" class=\"{word}\"><th role=\"rowheader\" scope=\"row\">{}{reason}</th>\
             <td role=\"cell\" data-label=\"Outcome\"><b class=\"word\">{word}</b></td>\
             <td role=\"cell\" data-label=\"Found\">{}</td>\
             <td role=\"cell\" data-label=\"Allowed\">{}</td>\
             <td role=\"cell\" data-label=\"Margin\">{}</td></tr>",
            escape(&check.name),
            or_dash(&check.found),
            or_dash(&check.allowed),
            margin(check.margin_db),
        );
    }
    html += "</tbody>\n</table>\n</section>\n";
    html
}

fn or_dash(text: &str) -> String {
    if text.is_empty() {
        "-".to_owned()
    } else {
        escape(text)
    }
}

/// A margin in figures and as a bar: to the right of the middle is within, to the left outside.
fn margin(margin_db: Option<f64>) -> String {
    let Some(margin) = margin_db.filter(|margin| margin.is_finite()) else {
        return "-".to_owned();
    };
    let reach = (margin.abs() / GAUGE_DB).min(1.0) * 50.0;
    let left = if margin < 0.0 { 50.0 - reach } else { 50.0 };
    format!(
        "<span class=\"number\">{margin:+.1} dB</span><span class=\"gauge\" aria-hidden=\"true\">\
         <i style=\"left:{left:.1}%;width:{reach:.1}%\"></i></span>"
    )
}

/// The most important numbers.
pub(super) fn key_figures(figures: &[KeyFigure]) -> String {
    if figures.is_empty() {
        return String::new();
    }
    let mut html = String::from(
        "<section aria-labelledby=\"key\">\n<h2 id=\"key\">Key figures</h2>\n<dl class=\"key\">\n",
    );
    for figure in figures {
        let note = if figure.note.is_empty() {
            String::new()
        } else {
            format!("<dd class=\"note\">{}</dd>", escape(&figure.note))
        };
        let _ = writeln!(
            html,
            "<div><dt>{}</dt><dd>{}</dd>{note}</div>",
            escape(&figure.name),
            escape(&figure.value)
        );
    }
    html += "</dl>\n</section>\n";
    html
}

/// The figures; each is there for wide and for narrow screens, and one is shown.
pub(super) fn figures(figures: &[CaptionedFigure]) -> Result<String, ReportError> {
    if figures.is_empty() {
        return Ok(String::new());
    }
    let mut html =
        String::from("<section aria-labelledby=\"figures\">\n<h2 id=\"figures\">Figures</h2>\n");
    for (index, captioned) in figures.iter().enumerate() {
        let _ = write!(
            html,
            "<figure>\n{}<figcaption><b>{}.</b> {}</figcaption>\n</figure>\n",
            captioned.figure.inline()?,
            index + 1,
            escape(&keep_units(&captioned.caption))
        );
    }
    html += "</section>\n";
    Ok(html)
}

/// Groups of names and values.
pub(super) fn facts(groups: &[FactGroup]) -> String {
    if groups.is_empty() {
        return String::new();
    }
    let mut html = String::from(
        "<section aria-labelledby=\"facts\">\n<h2 id=\"facts\">What was computed</h2>\n<div class=\"facts\">\n",
    );
    for group in groups {
        let _ = writeln!(
            html,
            "<table>\n<caption>{}</caption>\n<tbody>",
            escape(&group.title)
        );
        for (name, value) in &group.rows {
            let _ = writeln!(
                html,
                "<tr><th scope=\"row\">{}</th><td>{}</td></tr>",
                escape(name),
                escape(value)
            );
        }
        html += "</tbody>\n</table>\n";
    }
    html += "</div>\n</section>\n";
    html
}

/// How to repeat the run.
pub(super) fn conditions(conditions: &Conditions) -> String {
    let mut html = String::from(
        "<section class=\"repeat\" aria-labelledby=\"repeat\">\n<h2 id=\"repeat\">To repeat this</h2>\n",
    );
    if !conditions.command.is_empty() {
        let _ = writeln!(html, "<pre>{}</pre>", escape_lines(&conditions.command));
    }
    let seed = match conditions.seed {
        Some(seed) => format!("seed {seed}"),
        None => "no random numbers were drawn".to_owned(),
    };
    let _ = writeln!(
        html,
        "<p>quietedge {}; {seed}.</p>",
        escape(&conditions.version)
    );
    for (name, text) in &conditions.inputs {
        let name = escape(name);
        let _ = writeln!(
            html,
            "<h3>{name}</h3>\n<pre class=\"input\" tabindex=\"0\" aria-label=\"{name}\">{}</pre>",
            escape_lines(text)
        );
    }
    html += "</section>\n";
    html
}
