//! What the samples are: known answers, exactness against enumeration and published values.

mod agreement;
mod agreement_compact;
mod exactness;
mod faults;
mod physics;
mod properties;
mod statistics;
mod systems;
mod values;
mod vectors;
