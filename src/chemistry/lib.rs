//! Water, mash and treatment chemistry for a brewery.
//!
//! Numbers in, numbers out: no files, no clock, no database. Start with
//! [`water::Water`], the composition everything else is computed from:
//!
//! - [`report`] turns a laboratory's lines into canonical figures and says
//!   whether they can be believed;
//! - [`carbonate`] knows what a water does when it is mixed, heated, salted or
//!   acidified;
//! - [`material`] holds the salts, acids and bases;
//! - [`mash`] predicts the pH of a mash and how surely;
//! - [`plan`] finds the treatment of one batch;
//! - [`electrode`] says how far to believe a meter, [`reading`] makes one figure of what
//!   it showed, [`stages`] holds where it should lie;
//! - [`put_right`] says what to do about a mash, [`sparge`] about sparge liquor,
//!   [`kettle`] about wort.
//!
//! Every constant carries its source; [`references`] holds each source once.

pub mod acid;
pub mod carbonate;
pub mod electrode;
pub mod ion;
pub mod kettle;
pub mod mash;
pub mod material;
pub mod plan;
pub mod put_right;
pub mod quantity;
pub mod reading;
pub mod references;
pub mod report;
pub mod sparge;
pub mod stages;
pub mod water;
