//! # The pipeline: a sample and what is in force make a judged reading
//!
//! One code for live, imported and simulated samples. in: sample, point, book. out: a reading.
//! Names no SQL: the caller fetches what is in force and stores what comes out.
