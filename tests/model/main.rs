//! The library against identities, references and published values.

mod table_csv;
mod table_json;
mod table_sample;
mod table_text;
