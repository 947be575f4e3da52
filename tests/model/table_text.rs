use crate::table_sample::rates;
use clockspar::table::{TextOptions, write_text};
#[test]
fn show() {
    for (width, unicode) in [(None, true), (Some(80), true), (Some(40), false)] {
        let mut out = Vec::new();
        write_text(&rates(), &TextOptions { width, unicode }, &mut out).unwrap();
        println!("{}", String::from_utf8(out).unwrap());
    }
    let mut out = Vec::new();
    clockspar::table::write_json(&rates(), &mut out).unwrap();
    clockspar::table::write_csv(&rates(), 0, &mut out).unwrap();
    println!("{}", String::from_utf8(out).unwrap());
}
