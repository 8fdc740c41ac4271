//! Pulse sequences: a level that holds from one edge to the next.

use super::SignalError;
use super::blocks::Blocks;
use super::text::Columns;

/// An instant at which the level changes.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Edge {
    /// From the start of the sequence, s.
    pub time_s: f64,
    /// The level from here on; full scale is 1.0.
    pub level: f64,
}

/// Edges past this are not held in memory: 128 MB.
pub const MOST_EDGES: usize = 1 << 23;

/// A whole pulse sequence.
#[derive(Debug, Clone, PartialEq)]
pub struct PulseList {
    /// Times increase strictly.
    pub edges: Vec<Edge>,
    /// When it ends, s, where the file says so.
    pub end_s: Option<f64>,
}

/// A stream of edges that can be read again from its start. Times increase strictly.
pub trait PulseSource: Send {
    /// Fills `block` from its front and returns how many edges were written; 0 only at the end.
    ///
    /// # Errors
    /// Malformed data, times that do not increase, levels that are not finite, or an I/O failure.
    fn read(&mut self, block: &mut [Edge]) -> Result<usize, SignalError>;

    /// Goes back to the first edge.
    ///
    /// # Errors
    /// An I/O failure.
    fn rewind(&mut self) -> Result<(), SignalError>;

    /// When the sequence ends, s, where the file says so (levels at a rate do, edges do not).
    fn end_s(&self) -> Option<f64>;
}

/// Edges from a text file with the columns `time,level`.
pub(super) struct TextEdges {
    columns: Columns,
    gain: f64,
    last_s: f64,
}

impl TextEdges {
    pub(super) fn new(columns: Columns, full_scale: f64) -> Self {
        Self {
            columns,
            gain: 1.0 / full_scale,
            last_s: f64::NEG_INFINITY,
        }
    }
}

impl PulseSource for TextEdges {
    fn read(&mut self, block: &mut [Edge]) -> Result<usize, SignalError> {
        let mut count = 0;
        while count < block.len() {
            let Some([time_s, level]) = self.columns.next()? else {
                break;
            };
            if time_s <= self.last_s || time_s < 0.0 {
                let allowed = if self.columns.count() == 1 {
                    "a first edge at 0 s or later".to_owned()
                } else {
                    format!(
                        "times in seconds that increase from edge to edge: later than {} s",
                        self.last_s
                    )
                };
                return Err(SignalError::Line {
                    file: self.columns.file().to_owned(),
                    line: self.columns.line(),
                    given: format!("an edge at {time_s} s"),
                    allowed,
                });
            }
            self.last_s = time_s;
            let level = level * self.gain;
            if !level.is_finite() {
                return Err(SignalError::NotFinite {
                    file: self.columns.file().to_owned(),
                    sample: self.columns.count() - 1,
                    given: format!("{level} after scaling"),
                });
            }
            block[count] = Edge { time_s, level };
            count += 1;
        }
        Ok(count)
    }

    fn rewind(&mut self) -> Result<(), SignalError> {
        self.last_s = f64::NEG_INFINITY;
        self.columns.rewind()
    }

    fn end_s(&self) -> Option<f64> {
        None
    }
}

/// Edges where the levels of a mono file change. The first sample is an edge at 0 s.
pub(super) struct PcmEdges {
    blocks: Blocks,
    levels: Vec<f64>,
    filled: usize,
    used: usize,
    last: Option<f64>,
}

impl PcmEdges {
    pub(super) fn new(blocks: Blocks) -> Self {
        Self {
            blocks,
            levels: vec![0.0; 1 << 14],
            filled: 0,
            used: 0,
            last: None,
        }
    }
}

impl PulseSource for PcmEdges {
    fn read(&mut self, block: &mut [Edge]) -> Result<usize, SignalError> {
        let mut count = 0;
        while count < block.len() {
            if self.used == self.filled {
                self.filled = self.blocks.read_levels(&mut self.levels)?;
                self.used = 0;
                if self.filled == 0 {
                    break;
                }
            }
            let level = self.levels[self.used];
            if self.last != Some(level) {
                let index = self.blocks.position() - (self.filled - self.used) as u64;
                block[count] = Edge {
                    time_s: index as f64 / self.blocks.layout().rate_hz,
                    level,
                };
                count += 1;
                self.last = Some(level);
            }
            self.used += 1;
        }
        Ok(count)
    }

    fn rewind(&mut self) -> Result<(), SignalError> {
        (self.filled, self.used, self.last) = (0, 0, None);
        self.blocks.rewind()
    }

    fn end_s(&self) -> Option<f64> {
        let layout = self.blocks.layout();
        Some(layout.samples as f64 / layout.rate_hz)
    }
}
