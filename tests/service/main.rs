//! The real server on a free port with a fresh database, spoken to over HTTP.
//!
//! Start with `desk`: it starts the server and fills in the forms the pages offer.

#![allow(
    unreachable_pub,
    reason = "one program: its modules speak to each other"
)]

mod beers;
mod brew_day;
mod brewery;
mod brewhouse;
mod desk;
mod help;
mod hostile;
mod malts;
mod meters;
mod people;
mod plans;
mod program;
mod queued;
mod readiness;
mod readings;
mod record;
mod runnings;
mod shelf;
mod source_pages;
mod sources;
mod tablets;
mod weigh_out;
