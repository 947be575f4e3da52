//! What the screens look like.

use super::*;
use crate::program::terminal::ASCII;

#[test]
fn look() {
    let mut d = desk();
    let mut out = drawn(&d, 80, 24);
    press(&mut d, KeyCode::Char('2'));
    say(&mut d, "against pod5");
    out += &drawn(&d, 80, 24);
    press(&mut d, KeyCode::Esc);
    press(&mut d, KeyCode::Char('9'));
    out += &drawn(&d, 80, 24);
    press(&mut d, KeyCode::Char('0'));
    out += &drawn(&d, 80, 24);
    press(&mut d, KeyCode::Char('1'));
    say(&mut d, "hold 40000000 g0");
    for c in "step 1 ".chars() { press(&mut d, KeyCode::Char(c)); }
    out += &drawn(&d, 120, 40);
    let mut d = desk_on(BUILT_IN_TEXT, &ASCII);
    say(&mut d, "hold -0.2 g0");
    press(&mut d, KeyCode::Esc);
    out += &drawn(&d, 80, 24);
    out += &drawn(&d, 60, 16);
    out += &drawn(&d, 40, 10);
    std::fs::write("/tmp/look.txt", out).unwrap();
}
