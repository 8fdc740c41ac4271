//! A study without and with predistortion: page, terminal text and documents.

mod documents;
mod page;
mod tables;

pub(super) use tables::table_rows;

pub use documents::{polynomial_csv, polynomial_document, predistort_document};
pub use page::{margin_figure, page, spectra_figure, table_figure, text};
