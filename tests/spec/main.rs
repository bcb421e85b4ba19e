//! What is frozen: layers, schemas, golden archives, forgeries.

mod access;
mod damage;
mod drawing;
mod forge;
mod forgeries;
mod golden;
mod layers;
mod licences;
mod members;
mod nothing;
mod properties;
mod schemas;
mod toml_json;
