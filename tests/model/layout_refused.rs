//! Layouts that are refused, each with its message.
