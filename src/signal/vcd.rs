//! Edges of one signal of a value change dump (IEEE 1364-2005, clause 18).
//!
//! The parser is a library's; scopes are followed here, so that their depth costs no stack, and what one command may
//! consume is bounded.

use std::io::{self, BufRead, BufReader, Read};

use vcd::{Command, IdCode, ParseError, Parser, TimescaleUnit, Value, VarType};

use super::SignalError;
use super::pulse::{Edge, MOST_EDGES, PulseList};
use crate::input::{ReadSeek, nearest};

/// The longest command that is read, bytes: a comment, a name, a vector.
const LONGEST_COMMAND: usize = 1 << 20;

/// Scopes within each other past this are no design.
const DEEPEST: usize = 1000;

/// Signals past this are not listed in memory.
const MOST_SIGNALS: usize = 1 << 18;

/// Names that a message shows.
const SHOWN: usize = 8;

/// A reader that ends commands that do not end. The last line may lack its end.
struct Bounded<R> {
    reader: R,
    left: usize,
}

impl<R: BufRead> Read for Bounded<R> {
    fn read(&mut self, buffer: &mut [u8]) -> io::Result<usize> {
        let most = buffer.len().min(self.left);
        if most == 0 && !buffer.is_empty() {
            return Err(io::Error::other(format!(
                "a command of more than {LONGEST_COMMAND} bytes"
            )));
        }
        let count = self.reader.read(&mut buffer[..most])?;
        self.left -= count;
        Ok(count)
    }
}

impl<R: BufRead> BufRead for Bounded<R> {
    fn fill_buf(&mut self) -> io::Result<&[u8]> {
        self.reader.fill_buf()
    }

    fn consume(&mut self, amount: usize) {
        self.left = self.left.saturating_sub(amount);
        self.reader.consume(amount);
    }
}

/// One signal of the header.
struct Variable {
    name: String,
    code: IdCode,
    bits: u32,
    kind: VarType,
}

/// What a dump is read with.
struct Dump<R> {
    parser: Parser<Bounded<R>>,
    file: String,
}

impl<R: BufRead> Dump<R> {
    fn next(&mut self) -> Result<Option<Command>, SignalError> {
        self.parser.reader().left = LONGEST_COMMAND;
        self.parser.next().transpose().map_err(|error| {
            let inner = error.get_ref().and_then(|e| e.downcast_ref::<ParseError>());
            let (line, given) = match inner {
                Some(parse) => (parse.line(), parse.to_string()),
                None => (self.parser.line(), error.to_string()),
            };
            SignalError::Line {
                file: self.file.clone(),
                line,
                given,
                allowed: "a value change dump as of IEEE 1364".to_owned(),
            }
        })
    }

    fn wrong(&self, given: String, allowed: impl Into<String>) -> SignalError {
        SignalError::Line {
            file: self.file.clone(),
            line: self.parser.line(),
            given,
            allowed: allowed.into(),
        }
    }
}

/// Reads the edges of `signal` (its path with dots, or the end of it) from a dump. A scalar counts 0 and 1, a vector as an
/// unsigned number over its largest, a real as it is; `full_scale` replaces the largest. Before the first known value
/// the level is 0.
///
/// # Errors
/// [`SignalError::Line`] with the place of what is wrong.
pub(super) fn read(
    reader: Box<dyn ReadSeek>,
    file: &str,
    signal: Option<&str>,
    full_scale: Option<f64>,
) -> Result<PulseList, SignalError> {
    let reader = BufReader::with_capacity(1 << 16, reader).chain(&b"\n"[..]);
    let mut dump = Dump {
        parser: Parser::new(Bounded {
            reader,
            left: LONGEST_COMMAND,
        }),
        file: file.to_owned(),
    };
    let (tick_s, variables) = header(&mut dump)?;
    let variable = choose(&dump, &variables, signal)?;
    let scale = full_scale.unwrap_or_else(|| {
        if variable.kind == VarType::Real || variable.bits <= 1 {
            1.0
        } else {
            2f64.powi(variable.bits.min(1000) as i32) - 1.0
        }
    });
    let mut edges: Vec<Edge> = Vec::new();
    let mut now = 0u64;
    let mut first = None;
    let mut off = false;
    while let Some(command) = dump.next()? {
        let value = match command {
            Command::Timestamp(time) => {
                if time < now {
                    return Err(dump.wrong(
                        format!("time {time} after {now}"),
                        "times that do not decrease",
                    ));
                }
                first.get_or_insert(time);
                now = time;
                continue;
            }
            Command::ChangeScalar(code, value) if code == variable.code => scalar(value),
            Command::ChangeVector(code, bits) if code == variable.code => bits
                .iter()
                .try_fold(0.0, |sum, bit| Some(2.0 * sum + scalar(bit)?)),
            Command::ChangeReal(code, value) if code == variable.code => Some(value),
            Command::Begin(vcd::SimulationCommand::Dumpoff) => {
                off = true;
                continue;
            }
            Command::Begin(vcd::SimulationCommand::Dumpon) => {
                off = false;
                continue;
            }
            _ => continue,
        };
        let Some(value) = value else {
            if edges.is_empty() || off {
                continue;
            }
            return Err(dump.wrong(
                format!(
                    "an unknown value (x or z) of {} at time {now}",
                    variable.name
                ),
                "0 and 1 once it is known",
            ));
        };
        let level = value / scale;
        if !level.is_finite() {
            return Err(dump.wrong(format!("a level of {level}"), "finite levels"));
        }
        let time_s = (now - first.unwrap_or(0)) as f64 * tick_s;
        match edges.last_mut() {
            // Within one time the last value counts.
            Some(last) if last.time_s == time_s => last.level = level,
            Some(last) if last.level == level => {}
            _ => {
                if edges.len() >= MOST_EDGES {
                    return Err(
                        dump.wrong(format!("more than {MOST_EDGES} edges"), "a shorter dump")
                    );
                }
                edges.push(Edge { time_s, level });
            }
        }
    }
    if edges.is_empty() {
        return Err(SignalError::Malformed {
            file: file.to_owned(),
            given: format!("no known value of {}", variable.name),
            allowed: "a signal that changes".to_owned(),
        });
    }
    let end_s = (now - first.unwrap_or(0)) as f64 * tick_s;
    Ok(PulseList {
        edges,
        end_s: Some(end_s),
    })
}

fn scalar(value: Value) -> Option<f64> {
    match value {
        Value::V0 => Some(0.0),
        Value::V1 => Some(1.0),
        Value::X | Value::Z => None,
    }
}

/// The time unit, s, and every signal.
fn header<R: BufRead>(dump: &mut Dump<R>) -> Result<(f64, Vec<Variable>), SignalError> {
    let mut scopes: Vec<String> = Vec::new();
    let mut variables = Vec::new();
    let mut tick_s = None;
    loop {
        let Some(command) = dump.next()? else {
            return Err(dump.wrong(
                "the file's end within the header".to_owned(),
                "$enddefinitions",
            ));
        };
        match command {
            Command::Enddefinitions => break,
            Command::Timescale(count, unit) => {
                if ![1, 10, 100].contains(&count) {
                    return Err(
                        dump.wrong(format!("a time unit of {count}"), "1, 10 or 100 of s to fs")
                    );
                }
                tick_s = Some(f64::from(count) * seconds(unit));
            }
            Command::ScopeDef(_, name) if scopes.len() < DEEPEST => scopes.push(name),
            Command::ScopeDef(..) => {
                return Err(dump.wrong(
                    "scopes within scopes".to_owned(),
                    format!("at most {DEEPEST} within each other"),
                ));
            }
            Command::Upscope if scopes.pop().is_none() => {
                return Err(dump.wrong("$upscope".to_owned(), "a $scope before it"));
            }
            Command::Upscope => {}
            Command::VarDef(kind, bits, code, reference, _) => {
                if variables.len() >= MOST_SIGNALS {
                    return Err(dump.wrong(
                        format!("more than {MOST_SIGNALS} signals"),
                        "a dump of fewer signals",
                    ));
                }
                let mut name = scopes.join(".");
                if !name.is_empty() {
                    name.push('.');
                }
                name.push_str(&reference);
                variables.push(Variable {
                    name,
                    code,
                    bits,
                    kind,
                });
            }
            _ => {}
        }
    }
    let Some(tick_s) = tick_s else {
        return Err(dump.wrong("a header without its time unit".to_owned(), "$timescale"));
    };
    Ok((tick_s, variables))
}

fn seconds(unit: TimescaleUnit) -> f64 {
    unit.fraction()
}

/// The one signal that is meant.
fn choose<'a, R: BufRead>(
    dump: &Dump<R>,
    variables: &'a [Variable],
    signal: Option<&str>,
) -> Result<&'a Variable, SignalError> {
    let names = || {
        let mut shown: Vec<&str> = variables
            .iter()
            .take(SHOWN)
            .map(|v| v.name.as_str())
            .collect();
        if variables.len() > SHOWN {
            shown.push("...");
        }
        shown.join(", ")
    };
    let fault = |given: String, allowed: String| SignalError::Malformed {
        file: dump.file.clone(),
        given,
        allowed,
    };
    let Some(signal) = signal else {
        return match variables {
            [only] => Ok(only),
            [] => Err(fault(
                "no signals".to_owned(),
                "a dump with at least one".to_owned(),
            )),
            _ => Err(fault(
                format!("{} signals and no choice", variables.len()),
                format!("signal = one of {}", names()),
            )),
        };
    };
    if let Some(exact) = variables.iter().find(|v| v.name == signal) {
        return Ok(exact);
    }
    let ending = format!(".{signal}");
    let mut found = variables.iter().filter(|v| v.name.ends_with(&ending));
    match (found.next(), found.next()) {
        (Some(one), None) => Ok(one),
        // The same wire seen from several scopes.
        (Some(one), Some(other)) if other.code == one.code && found.all(|v| v.code == one.code) => {
            Ok(one)
        }
        (Some(one), Some(other)) => Err(fault(
            format!(
                "signal \"{signal}\", which is {} and {}",
                one.name, other.name
            ),
            "its whole path".to_owned(),
        )),
        (None, _) => {
            let all: Vec<&str> = variables.iter().map(|v| v.name.as_str()).collect();
            let hint =
                nearest(signal, &all).map_or(String::new(), |n| format!("; did you mean {n}?"));
            Err(fault(
                format!("signal \"{signal}\", which is not in it"),
                format!("one of {}{hint}", names()),
            ))
        }
    }
}
