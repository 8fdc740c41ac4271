//! What a capture is held against.

use super::Arguments;
use crate::cli::{Disk, Failure};
use crate::input::Files;
use crate::limits::{Library, LimitSet, Limits};
use crate::study::Study;

/// The sets that are named, with what was stated beside them.
pub(super) fn limits(arguments: &Arguments, study: Option<&Study>) -> Result<Limits, Failure> {
    if let Some(study) = study
        && arguments.limits.is_empty()
    {
        // The study's own, with what is stated beside them.
        let mut limits = study.limits.clone();
        limits.evm_percent = arguments.evm_limit.or(limits.evm_percent);
        limits.channel_hz = arguments.channel.or(limits.channel_hz);
        limits.authorized_bandwidth_hz = arguments
            .authorized_bandwidth
            .or(limits.authorized_bandwidth_hz);
        return Ok(limits);
    }
    let mut library = Library::published()?;
    let mut names = Vec::new();
    for word in &arguments.limits {
        if word.ends_with(".toml") {
            let text = Disk::here()
                .text(word)
                .map_err(|error| Failure::new(format!("cannot read {word}: {error}")))?;
            names.extend(library.add(word, &text)?);
        } else {
            names.push(word.clone());
        }
    }
    let sets: Vec<LimitSet> = names
        .iter()
        .map(|name| library.find(name).cloned())
        .collect::<Result<_, _>>()?;
    let limits = Limits {
        sets,
        evm_percent: arguments.evm_limit,
        channel_hz: arguments.channel,
        authorized_bandwidth_hz: arguments.authorized_bandwidth,
        classes: arguments.class.clone(),
        modulation: arguments.limit_modulation.clone(),
        ..Limits::default()
    };
    limits.complete().map_err(|unmet| {
        let option = match unmet.key {
            "modulation" => "limit-modulation".to_owned(),
            key => key.replace('_', "-"),
        };
        Failure::new(format!("--{option}: {unmet}"))
    })?;
    Ok(limits)
}
