//! # The ledger: all SQL, one file, nothing lost
//!
//! in: judged readings and events, in order. out: acknowledgements, rows, events, the book of electrodes.
//! Always: 1. a raw column is written once. 2. a sequence number is never reused. 3. events are appended and chained, never
//! changed. 4. acknowledged means synced. Not here: what a reading means (`pipeline`), the time of day (`daemon`).

mod audit;
mod backup;
mod book;
mod chain;
mod chart;
mod chores;
mod codec;
mod error;
pub mod event;
mod import;
mod line_state;
mod reader;
mod rollup;
mod row;
mod rows;
mod salvage;
mod schema;
mod seal;
mod storage;
mod store;
mod writer;

pub use audit::{AuditReport, ChainBreak};
pub use backup::backup;
pub use chart::Bucket;
pub use error::LedgerError;
pub use import::Imported;
pub use line_state::LineState;
pub use reader::Reader;
pub use row::PointId;
pub use salvage::{Salvaged, salvage};
pub use storage::{AuditNote, LONG_LOG, Storage, WriterNote};
pub use store::{Appended, Batch, Ledger};
pub use writer::{Clock, LONGEST_WAIT, Trouble, Writer, WriterStatus};
