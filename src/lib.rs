//! Leat: the water desk of a small brewery.
//!
//! One server with one SQLite file keeps water tests, treatment plans and mash-pH
//! outcomes, shows them as pages and serves the same operations as a JSON API.
//!
//! The code is grouped by what a brewer would call it: [`sources`], [`shelf`],
//! [`malts`], [`beers`], plans, [`meters`], [`people`], [`record`], [`brewery`]. Each group
//! has its nouns in `mod.rs`, its rules in `operations.rs`, its SQL in `store.rs`, and
//! two doors, `pages.rs` and `api.rs`. [`web`] is what both doors share. Start with
//! [`web::router`].

pub mod beers;
pub mod brewery;
pub mod config;
pub mod db;
pub mod demo;
pub mod error;
pub mod id;
pub mod input;
pub mod malts;
pub mod meters;
pub mod people;
pub mod plans;
pub mod record;
pub mod server;
pub mod shelf;
pub mod sources;
pub mod web;
