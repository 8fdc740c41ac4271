//! How pictures are drawn: charts as plain data, laid out as shapes, drawn as SVG or PNG by plotters.

mod axis;
mod canvas;
mod chart;
mod figure;
mod font;
mod label;
mod layout;
mod legend;
mod png;
mod svg;
mod thin;

pub(crate) use axis::{AxisSpec, Spread};
pub use canvas::Dash;
pub(crate) use chart::{Backdrop, Cell, Chart, Curve, Mark, Panel, Shade};
pub use figure::Figure;
pub(crate) use svg::{FONT_STACK, rules};
