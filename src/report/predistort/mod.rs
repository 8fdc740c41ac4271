//! A study without and with predistortion: page, terminal text and documents.

mod closed;
mod documents;
mod lookup;
mod page;
mod tables;

pub(super) use tables::table_rows;

pub use closed::{closed_document, closed_page, closed_spectra_figure, closed_text};
pub use documents::{polynomial_csv, polynomial_document, predistort_document};
pub use lookup::lookup_figure;
pub use page::{margin_figure, page, spectra_figure, table_figure, text};
