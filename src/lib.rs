//! `fewest` plans requests with times onto as few resources as possible, shows the plan,
//! and proves that fewer cannot do.
//!
//! The modules, from the ground up; each imports only from those above it in this list:
//!
//! - [`clock`] instants, spans, civil time; [`text`] cleaning and width of untrusted text;
//!   [`lookup`] maps by id
//! - [`timetable`] what is stated
//! - [`edit`] the language of changes
//! - [`claim`] what is answered, as data
//! - [`overlap`] load, peaks, cliques, components, clashes
//! - [`audit`] the independent checker of claims
//! - [`engine`] the search
//! - [`document`] the file as text, byte patches, plan files; [`store`] writing safely
//! - [`intake`] CSV in
//! - [`words`] sentences
//! - [`desk`] the open document: history, background solving
//! - [`actions`] the one table of keys and help
//! - [`screen`] the terminal screen; [`cli`] the commands

pub mod actions;
pub mod audit;
pub mod claim;
pub mod cli;
pub mod clock;
pub mod desk;
pub mod document;
pub mod edit;
pub mod engine;
pub mod intake;
pub mod lookup;
pub mod overlap;
pub mod screen;
pub mod store;
pub mod text;
pub mod timetable;
pub mod words;
