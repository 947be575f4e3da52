#![no_main]
//! Any bytes to the reader of a survey.

#[path = "../readers.rs"]
mod readers;

libfuzzer_sys::fuzz_target!(|bytes: &[u8]| readers::survey(bytes));
