//! Exact samples of lattice and graph models, sealed so that anyone can redraw them bit for bit.
//!
//! A *law* (a model with its parameters and its lattice), a seed and a number define one sample, to
//! the last bit: [`schema/STREAM.md`](stream::TEXT) says how, and this crate is one program that
//! follows it. The samples are exact: they are drawn by coupling from the past (J. G. Propp, D. B.
//! Wilson, Random Structures and Algorithms 9, 223, 1996), so nothing has to equilibrate. A run is
//! sealed in an archive of text and NPY members; any of its samples can be drawn again alone, and
//! the archive can be held against itself and against the digests that a paper prints.
//!
//! # Where to begin
//!
//! - One sample in memory: [`law`] and [`lattice`] say what, [`random_map`] turns it into thresholds,
//!   [`engine`] draws. The example below does just that.
//! - A run: [`plan`] reads what a person asks for, [`verb::draw`] draws and seals it.
//! - An archive of somebody else: [`archive::reading`] reads it, [`verb::show`] says what it holds,
//!   [`audit::replay`] draws again, [`audit::seal`] checks the whole.
//!
//! Nothing here prints, or reads a clock, an environment variable or a random device: seeds and times
//! are handed in. The program `pastproof` (feature `cli`) does all that, and is another crate.
//!
//! # Example
//!
//! Sample 7 of an Ising film of 8 by 8 sites at beta = 0.40:
//!
//! ```
//! use pastproof::engine::{Stop, coupling, plain::Plain};
//! use pastproof::lattice::{Boundary, Kind, Lattice, Regular};
//! use pastproof::law::{Beta, Law, Model};
//! use pastproof::number::Exact;
//! use pastproof::quantity::{Digest, SampleIndex, Seed};
//! use pastproof::random_map::RandomMap;
//! use pastproof::stream::Address;
//!
//! # fn main() -> pastproof::error::Result<()> {
//! let square = Regular::new(Kind::Hypercubic, vec![8, 8], vec![Boundary::Periodic; 2])?;
//! let model = Model::Ising {
//!     beta: Beta::Number(Exact::parse("0.40")?),
//!     coupling: Some(Exact::one()),
//!     field: Some(Exact::zero()),
//! };
//! let law = Law::new(model, Lattice::Regular(square), None)?;
//!
//! let address = Address {
//!     seed: Seed(Digest::of(b"Larkmoor 2026")),
//!     key: law.key()?,
//!     sample: SampleIndex(7),
//! };
//! let map = RandomMap::new(&law)?;
//! let sample = coupling::draw(&mut Plain::new(&map), &address, 0, 30, &Stop::default())?;
//!
//! assert!(sample.exact().is_some(), "the bounds met within 2^30 sweeps");
//! assert_eq!(sample.depth, 6);
//! // the independent reader of the definition, tests/oracle/stream1.py, gives the same
//! let hash = "518f9ca3045889f701d3bcf74f33ea553f5943182810359bbfcff275d94602ce";
//! assert_eq!(sample.hash().to_string(), hash);
//! println!("{}", sample.hash());
//! # Ok(())
//! # }
//! ```
//!
//! # Words
//!
//! - **Sample**: one configuration drawn from a law, with the record of how its coupling went. What
//!   one does to get it is to *draw* it.
//! - **Ensemble**: the samples of one law, numbered from 0. Its *key* is the digest of the law.
//! - **Run**: all ensembles of one plan under one seed.
//! - **Sweep**: one visit of every site that may change.
//! - **Epoch**: a stretch of the past with a generator of its own. Epoch 0 is the last sweep before
//!   time 0, epoch k > 0 the 2^(k-1) sweeps before those of epoch k - 1.
//! - **Random map**: the update of one sweep as a function of all states at once: its random numbers
//!   are fixed, the state is what goes in.
//! - **Stream**: the definition of where these random numbers come from, here `pastproof stream 1`.
//! - **Heat bath**: a site forgets its value and takes one from its law given its neighbours.
//! - **Lane**: one decision of a sweep, here one site; a *list* holds lanes that do not see each other.
//! - **Bounds**: two states that enclose every state of the system, from the start of an attempt on.
//! - **Coalescence**: the bounds become equal, so every state has become one.
//! - **Depth**: an attempt of depth d starts 2^d sweeps before time 0. A sample's depth is the least
//!   one at which the bounds are equal at time 0. Where they are not, even at the depth limit, the
//!   sample is *unfinished*: recorded and counted, never dropped.
//! - **Coupling time**: how far back one must start. Of a stored sample one knows that it lies above
//!   2^(depth-1), if depth > 0, and not above 2^depth sweeps.
//! - **Merged at**: the number of sweeps before time 0 from which on the bounds of the deciding
//!   attempt were equal.
//! - **Threshold**: floor(p 2^128) for a probability p; a lane's number of 128 digits is below it or not.
//! - **Replay**: draw a stored sample again and compare every bit.
//! - **Seal**: finish an archive for good; also the digest of its manifest. The *root* is the digest
//!   of the record, the science alone.
//!
//! # What is not supported
//!
//! - Laws other than the Ising model and the lattice gas by heat bath of sites. The stream defines the
//!   random-cluster and Potts models too; a plan that asks for them is refused.
//! - Drawing below the critical temperature in useful time: see the previous point.
//! - A fast engine. The plain one is the definition, and there is no other yet.
//! - Resuming a run that was stopped, adding samples to an archive, cutting a run into parts.
//! - Continuous spins, and sites with more than two states.
//! - Estimators, errors, figures. Samples are exported as they are, in NPY.
//!
//! `README.md` shows the program at work, `DEVELOPERS.md` says why things are as they are, and
//! `schema/` holds what is frozen.

pub mod archive;
pub mod audit;
pub mod canonical;
pub mod clock;
pub mod engine;
pub mod error;
pub mod exact;
pub mod lattice;
pub mod law;
pub mod number;
pub mod observable;
pub mod observer;
pub mod plan;
pub mod quantity;
pub mod random_map;
pub mod sample;
pub mod statistics;
pub mod stream;
pub mod threshold;
pub mod tree;
pub mod verb;
