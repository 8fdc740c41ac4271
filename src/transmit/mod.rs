//! STEP 5: from the track to the complex envelope that leaves the stage.

mod by_map;
mod by_replay;
mod replay;

pub use by_map::{Energy, MapTransmitter};
pub use by_replay::{ReplayRequest, ReplayTransmitter};
pub use replay::{
    Account, Cut, Cycle, CycleOutput, Energies, Form, Gate, Interval, MAX_HARMONICS,
    MAX_REPLAY_STATES, Pulse, Replay, ReplayError, Segments, Setup, Timing, replay_all, replay_cut,
};
