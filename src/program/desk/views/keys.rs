//! The list of keys and sentences, made from the tables the desk acts by.

use clockspar::table::{Cell, Column, Measure, Table};

use super::{VIEWS, View};
use crate::program::desk::keys::BINDINGS;
use crate::program::desk::sentences::FORMS;
use crate::program::desk::state::Desk;

/// The view.
pub static VIEW: View = View {
    digit: '0',
    name: "keys",
    table: Some(table),
    first: &[],
    nodes: false,
    beside: None,
    note: None,
};

const COLUMNS: [Column; 2] = [
    Column { key: "key", heading: "key or sentence", measure: Measure::Word },
    Column { key: "does", heading: "what it does", measure: Measure::Word },
];

/// Digits, keys, sentences.
fn line(row: usize) -> Option<[String; 2]> {
    let mut row = row;
    if let Some(view) = VIEWS.get(row) {
        let does = match (view.digit, view.table) {
            (_, None) => format!("the view `{}`, which is not there yet", view.name),
            ('0', _) => "this list of keys and sentences".to_owned(),
            _ => format!("the view `{}`", view.name),
        };
        return Some([view.digit.to_string(), does]);
    }
    row -= VIEWS.len();
    if let Some(binding) = BINDINGS.get(row) {
        return Some([binding.name.to_owned(), binding.does.to_owned()]);
    }
    row -= BINDINGS.len();
    if row == 0 {
        return Some(["any other sign".to_owned(), "begins a sentence in the entry".to_owned()]);
    }
    let form = FORMS.get(row - 1)?;
    let pattern = form.pattern();
    let does = if pattern == form.example {
        form.does.to_owned()
    } else {
        format!("{}: {pattern}", form.does)
    };
    Some([form.example.to_owned(), does])
}

fn table(_: &Desk) -> Option<Table<'_>> {
    Some(Table {
        name: "keys",
        columns: COLUMNS.to_vec(),
        rows: VIEWS.len() + BINDINGS.len() + 1 + FORMS.len(),
        marked: None,
        fill: Box::new(|row, cells| {
            if let Some(line) = line(row) {
                cells.extend(line.map(|text| Cell::Text(text.into())));
            }
        }),
    })
}
