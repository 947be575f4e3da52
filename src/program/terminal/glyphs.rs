//! Every mark the desk draws, in one table with a Unicode and an ASCII column.
//!
//! Each mark is one column wide in both columns of the table, so no layout depends
//! on which one is in use. The Unicode marks are taken from the widely carried
//! WGL4 set, the bar steps and the plan line's slopes excepted, and none of them
//! has a picture form that a terminal could draw two columns wide.

/// What the reader asked for on the command line.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default)]
pub enum GlyphChoice {
    /// Decide from the locale.
    #[default]
    Auto,
    /// ASCII marks only.
    Ascii,
    /// Unicode marks, whatever the locale says.
    Unicode,
}

macro_rules! glyph_table {
    ($( $(#[$about:meta])* $name:ident: $unicode:literal, $ascii:literal; )*) => {
        /// The marks in use; take one by its meaning, never write it in a view.
        #[derive(Debug, Clone, Copy, PartialEq, Eq)]
        pub struct Glyphs {
            /// Whether only ASCII may be sent to the terminal.
            pub ascii_only: bool,
            /// Filling from an eighth to the whole of a cell, for bars and charts.
            pub steps: [&'static str; 8],
            $( $(#[$about])* pub $name: &'static str, )*
        }

        /// The marks for a terminal that shows Unicode.
        pub static UNICODE: Glyphs = Glyphs {
            ascii_only: false,
            steps: ["▁", "▂", "▃", "▄", "▅", "▆", "▇", "█"],
            $( $name: $unicode, )*
        };

        /// The marks for every other terminal.
        pub static ASCII: Glyphs = Glyphs {
            ascii_only: true,
            steps: [".", ",", "-", "~", "+", "=", "%", "#"],
            $( $name: $ascii, )*
        };

        impl Glyphs {
            /// The name and the text of every mark.
            #[cfg(test)]
            fn entries(&self) -> Vec<(&'static str, &'static str)> {
                vec![ $( (stringify!($name), self.$name), )* ]
            }
        }
    };
}

glyph_table! {
    /// A node on the drawn line.
    node: "●", "o";
    /// The reference node.
    reference: "■", "#";
    /// A node that has been released and falls freely.
    released: "○", "O";
    /// A station beside the launch site.
    station: "▲", "A";
    /// The horizon of the line.
    horizon: "║", "!";
    /// A span under tension.
    taut: "─", "-";
    /// A span without tension.
    slack: "·", ".";
    /// A span or node past its rating.
    over: "═", "=";
    /// A gap that nothing holds together.
    broken: "×", "x";
    /// A tether from a node down to the next.
    tether_down: "│", "|";
    /// A boom from a node down to the next.
    boom_down: "┃", "H";
    /// A gap from a node down to the next that nothing spans.
    gap_down: ":", ":";
    /// The aft end of the drawn line.
    aft_end: "├", "[";
    /// The fore end of the drawn line.
    fore_end: "┤", "]";
    /// The plan line while the acceleration is held.
    plan_level: "─", "-";
    /// The plan line while the acceleration rises.
    plan_rising: "/", "/";
    /// The plan line while the acceleration falls.
    plan_falling: "\\", "\\";
    /// A jump of the plan line, drawn upright.
    plan_jump: "│", "|";
    /// The line of no acceleration behind the plan line.
    plan_zero: "·", ".";
    /// The present moment, above the plan line.
    present: "▼", "v";
    /// The present moment, drawn through a chart.
    present_through: "│", ":";
    /// The selected row or node.
    selected: "►", ">";
    /// More rows above the window.
    more_above: "▲", "^";
    /// More rows below the window.
    more_below: "▼", "v";
    /// More columns left of the window.
    more_left: "◄", "<";
    /// More columns right of the window.
    more_right: "►", ">";
    /// The place where text has been cut.
    ellipsis: "…", "~";
    /// The sign of a negative number.
    minus: "−", "-";
    /// The place of a value that does not exist.
    absent: "–", "-";
    /// Between two parts of one line of text.
    between: "·", "|";
    /// A dot of a horizon on a launch-frame chart.
    horizon_dot: "×", "x";
    /// The upper half of a worldline's cell.
    track_upper: "▀", "\"";
    /// The lower half of a worldline's cell.
    track_lower: "▄", "_";
    /// A cell a worldline runs through from top to bottom.
    track_both: "█", "#";
    /// The upper half of a light ray's cell.
    ray_upper: "'", "'";
    /// The lower half of a light ray's cell.
    ray_lower: ".", ".";
    /// A cell a light ray runs through from top to bottom.
    ray_both: ":", ":";
    /// A measured point on a chart.
    point: "•", "*";
    /// The filled part of a bar.
    bar_full: "█", "#";
    /// The part of a bar that is not filled.
    bar_empty: "░", ".";
    /// The limit on a bar.
    bar_limit: "│", "|";
    /// A rule from left to right.
    horizontal: "─", "-";
    /// A rule from top to bottom.
    vertical: "│", "|";
    /// The upper left corner of a box.
    top_left: "┌", "+";
    /// The upper right corner of a box.
    top_right: "┐", "+";
    /// The lower left corner of a box.
    bottom_left: "└", "+";
    /// The lower right corner of a box.
    bottom_right: "┘", "+";
    /// A vertical rule with a branch to the right.
    branch_right: "├", "+";
    /// A vertical rule with a branch to the left.
    branch_left: "┤", "+";
    /// A horizontal rule with a branch down.
    branch_down: "┬", "+";
    /// A horizontal rule with a branch up.
    branch_up: "┴", "+";
    /// Two rules that cross.
    cross: "┼", "+";
}

impl Glyphs {
    /// The marks for a choice and a locale; `variable` looks up the environment.
    ///
    /// The locale is the first of `LC_ALL`, `LC_CTYPE` and `LANG` that is not empty,
    /// and it shows Unicode when its encoding is UTF-8.
    pub fn choose(
        choice: GlyphChoice,
        variable: &dyn Fn(&str) -> Option<String>,
    ) -> &'static Glyphs {
        match choice {
            GlyphChoice::Ascii => &ASCII,
            GlyphChoice::Unicode => &UNICODE,
            GlyphChoice::Auto if locale_is_utf8(variable) => &UNICODE,
            GlyphChoice::Auto => &ASCII,
        }
    }
}

/// Whether the effective locale's encoding is UTF-8.
fn locale_is_utf8(variable: &dyn Fn(&str) -> Option<String>) -> bool {
    let locale = ["LC_ALL", "LC_CTYPE", "LANG"]
        .into_iter()
        .find_map(|name| variable(name).filter(|value| !value.is_empty()))
        .unwrap_or_default()
        .to_ascii_lowercase();
    locale.contains("utf-8") || locale.contains("utf8")
}

#[cfg(test)]
mod tests {
    use super::*;
    use unicode_width::UnicodeWidthStr;

    #[test]
    fn every_mark_is_one_column_wide_and_the_ascii_column_is_ascii() {
        for glyphs in [&UNICODE, &ASCII] {
            let steps = glyphs.steps.iter().map(|step| ("steps", *step));
            for (name, text) in glyphs.entries().into_iter().chain(steps) {
                assert_eq!(text.width(), 1, "{name} {text:?}");
                assert_eq!(text.chars().count(), 1, "{name} {text:?}");
                if glyphs.ascii_only {
                    assert!(text.is_ascii(), "{name} {text:?}");
                }
            }
        }
    }

    #[test]
    fn marks_of_the_drawn_line_differ_from_one_another() {
        for glyphs in [&UNICODE, &ASCII] {
            let drawn = [
                glyphs.node,
                glyphs.reference,
                glyphs.released,
                glyphs.station,
                glyphs.horizon,
                glyphs.taut,
                glyphs.slack,
                glyphs.over,
                glyphs.broken,
                glyphs.selected,
            ];
            for (index, mark) in drawn.iter().enumerate() {
                assert!(!drawn[..index].contains(mark), "{mark:?} twice");
            }
        }
    }

    #[test]
    fn the_first_locale_variable_that_is_not_empty_decides() {
        let chosen = |variables: &[(&str, &str)]| {
            Glyphs::choose(GlyphChoice::Auto, &|name| {
                variables
                    .iter()
                    .find(|(known, _)| *known == name)
                    .map(|(_, value)| (*value).to_owned())
            })
            .ascii_only
        };
        assert!(chosen(&[]));
        assert!(chosen(&[("LANG", "C")]));
        assert!(!chosen(&[("LANG", "en_GB.UTF-8")]));
        assert!(!chosen(&[("LANG", "C.utf8")]));
        assert!(chosen(&[("LANG", "C.utf8"), ("LC_ALL", "C")]));
        assert!(!chosen(&[("LANG", "C.utf8"), ("LC_ALL", "")]));
        assert!(!chosen(&[("LANG", "C"), ("LC_CTYPE", "de_DE.UTF8")]));
        assert!(chosen(&[("LC_ALL", "de_DE.ISO-8859-1")]));
    }
}
