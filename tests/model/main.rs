mod table_sample;
mod table_text;
