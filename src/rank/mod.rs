//! Sources with what their lines say into an ordered list with reasons, and into statistics of the sample.
//!
//! The order follows one rule, [`compare`]: the mass rate (or speed) that infall is expected to bring, how probable
//! infall is times how much it then is, then the name. How firm a place is follows from draws of everything
//! that is uncertain. Files, tables and words beyond a sentence are not made here.

mod combine;
mod order;
mod sample;
mod source;
mod why;

pub use combine::{combine, leading};
pub use order::{Quantity, RankSpread, compare, expected, quantity, rank_spreads};
pub use sample::{
    Correlation, GroupTest, Middle, PairStatistics, Sample, Share, Side, SourceFacts, sample,
};
pub use source::{Drawn, Finding, Grade, Profile, Source};
pub use why::why;
