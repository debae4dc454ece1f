//! The solver against closed forms, references computed elsewhere, and the laws every network keeps.

mod closed;
mod failures;
mod midband;
mod net;
mod random;
mod reference;
mod regions;
mod runaway;
mod thermal;
mod timing;
