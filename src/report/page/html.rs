//! The frame of the page: head, order of the sections, foot.

use super::{Page, parts};
use crate::report::cautions::CAUTIONS;
use crate::report::error::ReportError;
use crate::report::palette::{self, Role};
use crate::report::picture;
use crate::report::text::escape;

const STYLE: &str = include_str!("page.css");

/// Writes the whole page.
pub(super) fn page(page: &Page) -> Result<String, ReportError> {
    let title = escape(&page.title);
    let mut html = format!(
        "<!DOCTYPE html>\n<html lang=\"en\">\n<head>\n<meta charset=\"utf-8\">\n\
         <meta http-equiv=\"Content-Security-Policy\" content=\"default-src 'none'; style-src 'unsafe-inline'\">\n\
         <meta name=\"viewport\" content=\"width=device-width, initial-scale=1\">\n\
         <meta name=\"color-scheme\" content=\"light dark\">\n\
         <title>{title}</title>\n<style>\n{}</style>\n</head>\n<body>\n<main>\n<header>\n<h1>{title}</h1>\n",
        style()
    );
    if !page.subtitle.is_empty() {
        html += &format!("<p class=\"subtitle\">{}</p>\n", escape(&page.subtitle));
    }
    if let Some(headline) = &page.headline {
        html += &parts::headline(headline);
    }
    html += "</header>\n";
    html += &parts::list(
        "warnings",
        "Warnings",
        page.warnings.iter().map(String::as_str),
    );
    html += &parts::checks(&page.checks);
    html += &parts::key_figures(&page.key_figures);
    html += &parts::figures(&page.figures)?;
    html += &parts::facts(&page.facts);
    html += &parts::list(
        "model",
        "What the model leaves out",
        page.model_limits.iter().map(String::as_str),
    );
    html += &parts::list("cautions", "Cautions", CAUTIONS.into_iter());
    html += &parts::conditions(&page.conditions);
    html += "</main>\n</body>\n</html>\n";
    Ok(html)
}

/// Colours, picture rules and the page's own rules.
fn style() -> String {
    let light = palette::declarations(Role::light);
    let dark = palette::declarations(Role::dark);
    format!(
        ":root{{{light}--face:{}}}\n\
         @media (prefers-color-scheme:dark){{:root{{{dark}}}}}\n\
         @media print{{:root{{{light}--paper:#fff;color-scheme:light}}}}\n{}\n{STYLE}",
        picture::FONT_STACK,
        picture::rules(),
    )
}
