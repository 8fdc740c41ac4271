//! STEP 5: from the track to the complex envelope that leaves the stage.

mod by_map;

pub use by_map::{Energy, MapTransmitter};
