//! What the samples are: known answers, exactness against enumeration and published values.

mod agreement;
mod agreement_compact;
mod coupling_times;
mod exactness;
mod faults;
mod forecast;
mod physics;
mod properties;
mod statistics;
mod systems;
mod values;
mod vectors;
