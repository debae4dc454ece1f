//! The folder: dependencies, the register, issues that survive being stopped.

mod bad;
mod issue;
mod kill;
mod parts;
pub mod tiny;
