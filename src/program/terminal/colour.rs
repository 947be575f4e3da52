//! How many colours the terminal is trusted with, and the codes that select them.

use ratatui::style::Color;

/// What the reader asked for on the command line.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default)]
pub enum ColourChoice {
    /// Decide from the environment.
    #[default]
    Auto,
    /// Colours, whatever the environment says.
    Always,
    /// No colours, whatever the environment says.
    Never,
}

/// The number of colours the output may use.
///
/// Bold, dim, underlined and reversed text is drawn at every depth: `NO_COLOR`
/// asks for no colour, not for no selected row.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Depth {
    /// No colour codes at all.
    Mono,
    /// The sixteen named colours, as SGR 30–37 and 90–97.
    Sixteen,
    /// The named colours and the fixed palette of 256.
    Palette,
}

/// Beginnings of TERM values whose terminals understand SGR 30–37 and 90–97.
///
/// A terminal that is not listed is drawn without colour: a wrong guess can turn
/// text blinking or invisible, and every state is a word before it is a colour.
const COLOURED: [&str; 20] = [
    "alacritty",
    "contour",
    "cygwin",
    "eterm",
    "foot",
    "ghostty",
    "gnome",
    "iterm",
    "kitty",
    "konsole",
    "linux",
    "mlterm",
    "putty",
    "rxvt",
    "screen",
    "st-",
    "tmux",
    "vte",
    "wezterm",
    "xterm",
];

/// Decides the colour depth.
///
/// The order is: the choice on the command line, then `NO_COLOR` when it is not
/// empty, then `CLICOLOR_FORCE` when it is neither empty nor `0`, then whether the
/// output is a terminal and TERM names one that is known to have colours.
/// `variable` looks up an environment variable.
pub fn depth(
    choice: ColourChoice,
    is_terminal: bool,
    variable: &dyn Fn(&str) -> Option<String>,
) -> Depth {
    let set = |name: &str| variable(name).filter(|value| !value.is_empty());
    let by_name = depth_by_name(set("TERM").as_deref(), set("COLORTERM").as_deref());
    let at_least_sixteen = match by_name {
        Depth::Mono => Depth::Sixteen,
        known => known,
    };
    match choice {
        ColourChoice::Never => Depth::Mono,
        ColourChoice::Always => at_least_sixteen,
        ColourChoice::Auto if set("NO_COLOR").is_some() => Depth::Mono,
        ColourChoice::Auto if set("CLICOLOR_FORCE").is_some_and(|value| value != "0") => {
            at_least_sixteen
        }
        ColourChoice::Auto if is_terminal => by_name,
        ColourChoice::Auto => Depth::Mono,
    }
}

/// The depth that the names in TERM and COLORTERM promise.
fn depth_by_name(term: Option<&str>, colorterm: Option<&str>) -> Depth {
    let term = term.unwrap_or("").to_ascii_lowercase();
    if term.is_empty() || term == "dumb" || term.ends_with("-m") || term.ends_with("-mono") {
        return Depth::Mono;
    }
    let many = colorterm.is_some_and(|value| matches!(value, "truecolor" | "24bit"));
    if many || term.contains("256color") || term.contains("direct") {
        Depth::Palette
    } else if term == "st"
        || term.contains("color")
        || COLOURED.iter().any(|known| term.starts_with(known))
    {
        Depth::Sixteen
    } else {
        Depth::Mono
    }
}

/// A colour after the terminal's depth has been taken into account.
///
/// Two colours that look the same at a depth compare equal, so changing from one
/// to the other sends nothing.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default)]
pub(super) enum Paint {
    /// The terminal's own colour.
    #[default]
    Own,
    /// One of the sixteen named colours.
    Named(u8),
    /// An entry of the palette of 256, 16 or higher.
    Entry(u8),
}

impl Paint {
    /// What is left of `colour` at `depth`.
    pub(super) fn of(colour: Color, depth: Depth) -> Paint {
        if depth == Depth::Mono {
            return Paint::Own;
        }
        match colour {
            Color::Reset => Paint::Own,
            Color::Black => Paint::Named(0),
            Color::Red => Paint::Named(1),
            Color::Green => Paint::Named(2),
            Color::Yellow => Paint::Named(3),
            Color::Blue => Paint::Named(4),
            Color::Magenta => Paint::Named(5),
            Color::Cyan => Paint::Named(6),
            Color::Gray => Paint::Named(7),
            Color::DarkGray => Paint::Named(8),
            Color::LightRed => Paint::Named(9),
            Color::LightGreen => Paint::Named(10),
            Color::LightYellow => Paint::Named(11),
            Color::LightBlue => Paint::Named(12),
            Color::LightMagenta => Paint::Named(13),
            Color::LightCyan => Paint::Named(14),
            Color::White => Paint::Named(15),
            Color::Indexed(index) if index < 16 => Paint::Named(index),
            Color::Indexed(index) => match depth {
                Depth::Palette => Paint::Entry(index),
                _ => Paint::Named(nearest(entry_rgb(index), 0, 15)),
            },
            Color::Rgb(red, green, blue) => match depth {
                Depth::Palette => Paint::Entry(nearest([red, green, blue], 16, 255)),
                _ => Paint::Named(nearest([red, green, blue], 0, 15)),
            },
        }
    }

    /// Appends the SGR parameters that select this paint for text or background.
    pub(super) fn push_parameters(self, background: bool, parameters: &mut Vec<u8>) {
        let shift = if background { 10 } else { 0 };
        match self {
            Paint::Own => parameters.push(39 + shift),
            Paint::Named(index @ 0..8) => parameters.push(30 + shift + index),
            Paint::Named(index) => parameters.push(82 + shift + index),
            Paint::Entry(index) => parameters.extend([38 + shift, 5, index]),
        }
    }
}

/// The red, green and blue of a palette entry as xterm sets them out.
fn entry_rgb(index: u8) -> [u8; 3] {
    const NAMED: [[u8; 3]; 16] = [
        [0, 0, 0],
        [205, 0, 0],
        [0, 205, 0],
        [205, 205, 0],
        [0, 0, 238],
        [205, 0, 205],
        [0, 205, 205],
        [229, 229, 229],
        [127, 127, 127],
        [255, 0, 0],
        [0, 255, 0],
        [255, 255, 0],
        [92, 92, 255],
        [255, 0, 255],
        [0, 255, 255],
        [255, 255, 255],
    ];
    const STEPS: [u8; 6] = [0, 95, 135, 175, 215, 255];
    match index {
        0..16 => NAMED[usize::from(index)],
        16..232 => {
            let cube = usize::from(index - 16);
            [STEPS[cube / 36], STEPS[cube / 6 % 6], STEPS[cube % 6]]
        }
        232.. => [8 + 10 * (index - 232); 3],
    }
}

/// The palette entry from `first` to `last` that lies nearest to a colour.
fn nearest(wanted: [u8; 3], first: u8, last: u8) -> u8 {
    let distance = |index: &u8| -> u32 {
        let entry = entry_rgb(*index);
        (0..3).map(|part| u32::from(entry[part].abs_diff(wanted[part])).pow(2)).sum()
    };
    (first..=last).min_by_key(distance).unwrap_or(first)
}

#[cfg(test)]
mod tests {
    use super::*;

    fn decided(choice: ColourChoice, is_terminal: bool, variables: &[(&str, &str)]) -> Depth {
        depth(choice, is_terminal, &|name| {
            variables.iter().find(|(known, _)| *known == name).map(|(_, value)| (*value).to_owned())
        })
    }

    #[test]
    fn the_flag_beats_the_environment_and_no_color_beats_force() {
        use ColourChoice::{Always, Auto, Never};
        let xterm = ("TERM", "xterm-256color");
        let no = ("NO_COLOR", "1");
        let force = ("CLICOLOR_FORCE", "1");
        assert_eq!(decided(Auto, true, &[xterm]), Depth::Palette);
        assert_eq!(decided(Auto, true, &[xterm, no]), Depth::Mono);
        assert_eq!(decided(Auto, true, &[xterm, ("NO_COLOR", "")]), Depth::Palette);
        assert_eq!(decided(Auto, true, &[xterm, no, force]), Depth::Mono);
        assert_eq!(decided(Always, true, &[xterm, no]), Depth::Palette);
        assert_eq!(decided(Never, true, &[xterm, force]), Depth::Mono);
        assert_eq!(decided(Auto, false, &[xterm]), Depth::Mono);
        assert_eq!(decided(Auto, false, &[xterm, force]), Depth::Palette);
        assert_eq!(decided(Auto, false, &[xterm, ("CLICOLOR_FORCE", "0")]), Depth::Mono);
        assert_eq!(decided(Auto, true, &[("TERM", "vt220"), force]), Depth::Sixteen);
    }

    #[test]
    fn an_unknown_terminal_gets_no_colour() {
        for (term, wanted) in [
            ("", Depth::Mono),
            ("dumb", Depth::Mono),
            ("vt100", Depth::Mono),
            ("vt220", Depth::Mono),
            ("xterm-mono", Depth::Mono),
            ("wyse60", Depth::Mono),
            ("linux", Depth::Sixteen),
            ("xterm", Depth::Sixteen),
            ("screen", Depth::Sixteen),
            ("st", Depth::Sixteen),
            ("xterm-color", Depth::Sixteen),
            ("tmux-256color", Depth::Palette),
            ("xterm-direct", Depth::Palette),
        ] {
            assert_eq!(
                decided(ColourChoice::Auto, true, &[("TERM", term)]),
                wanted,
                "TERM={term:?}"
            );
        }
        let truecolor = [("TERM", "xterm"), ("COLORTERM", "truecolor")];
        assert_eq!(decided(ColourChoice::Auto, true, &truecolor), Depth::Palette);
    }

    #[test]
    fn a_shallow_depth_takes_the_nearest_colour_it_has() {
        let sixteen = |colour| Paint::of(colour, Depth::Sixteen);
        assert_eq!(sixteen(Color::Indexed(196)), Paint::Named(9));
        assert_eq!(sixteen(Color::Rgb(0, 0, 0)), Paint::Named(0));
        assert_eq!(sixteen(Color::Indexed(7)), Paint::Named(7));
        assert_eq!(Paint::of(Color::Rgb(255, 0, 0), Depth::Palette), Paint::Entry(196));
        assert_eq!(Paint::of(Color::Red, Depth::Mono), Paint::Own);
    }

    #[test]
    fn named_colours_use_the_short_codes() {
        let codes = |colour, background| {
            let mut parameters = Vec::new();
            Paint::of(colour, Depth::Sixteen).push_parameters(background, &mut parameters);
            parameters
        };
        assert_eq!(codes(Color::Red, false), [31]);
        assert_eq!(codes(Color::Gray, true), [47]);
        assert_eq!(codes(Color::DarkGray, false), [90]);
        assert_eq!(codes(Color::White, true), [107]);
        assert_eq!(codes(Color::Reset, false), [39]);
        assert_eq!(codes(Color::Reset, true), [49]);
    }
}
