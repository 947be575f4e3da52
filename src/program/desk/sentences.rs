//! The sentences of the entry line, in one table: they are read by it, completed by it,
//! and listed from it.

use clockspar::layout::date::parse_moment;
use clockspar::layout::quantity::{self, Dimension};
use clockspar::layout::{Course, Layout};
use clockspar::model::array_time::ArrayTime;
use clockspar::run::EventKind;

use super::message::Notice;
use super::step::Step;

/// What a sentence asks for.
#[derive(Clone, Debug, PartialEq)]
pub enum Sentence {
    /// Go to a moment.
    To(ArrayTime),
    /// Step by this from now on.
    Step(Step),
    /// Show differences against a node, or against the reference.
    Against(Option<usize>),
    /// Run at this many seconds of array time per second.
    Pace(f64),
    /// Show this part of the launch frame.
    Chart(Shift),
    /// Show what a node passes once it is let go, or the stations.
    ReachOf(Option<usize>),
    /// Change the run at the present moment.
    Change(EventKind),
    /// Take the last change back.
    Undo,
    /// Record into a new file.
    RecordTo(String),
    /// Close the recording.
    RecordClose,
    /// Write the layout as flown to a new file.
    SaveAs(String),
}

/// How the chart of the launch frame is moved.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Shift {
    /// Twice as near, or half as near.
    Zoom(i32),
    /// Everything in sight again.
    All,
    /// So many metres towards the fore end.
    Fore(f64),
    /// So many seconds later.
    Later(f64),
}

/// A part of a sentence.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Part {
    /// This very word.
    Word(&'static str),
    /// Something to fill in.
    Slot(Slot),
}

/// What can be filled in.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Slot {
    /// A moment of array time.
    Moment,
    /// A length of time.
    Time,
    /// The name of a node.
    Node,
    /// An acceleration.
    Acceleration,
    /// A position on the line.
    Position,
    /// A plain number.
    Number,
    /// Any text.
    Text,
    /// The name of a file.
    File,
}

impl Slot {
    /// How it is written in the list of sentences.
    pub fn word(self) -> &'static str {
        match self {
            Slot::Moment => "MOMENT",
            Slot::Time => "TIME",
            Slot::Node => "NODE",
            Slot::Acceleration => "ACCELERATION",
            Slot::Position => "POSITION",
            Slot::Number => "NUMBER",
            Slot::Text => "TEXT",
            Slot::File => "FILE",
        }
    }

    /// Units that may follow a number in it, those most wanted first.
    pub fn units(self) -> Vec<&'static str> {
        let (dimension, wanted): (_, &[&str]) = match self {
            Slot::Moment | Slot::Time => (Dimension::Time, &["s", "min", "h", "d", "ms", "us"]),
            Slot::Acceleration => (Dimension::Acceleration, &["g0", "mg0"]),
            Slot::Position => (Dimension::Length, &["m", "km"]),
            Slot::Node | Slot::Number | Slot::Text | Slot::File => return Vec::new(),
        };
        let mut units: Vec<&str> = dimension.units().collect();
        units.sort_by_key(|unit| {
            wanted.iter().position(|known| known == unit).unwrap_or(wanted.len())
        });
        units
    }
}

/// Makes what a sentence asks for from what was filled in.
type Make = fn(&[&str], &Layout) -> Result<Sentence, Notice>;

/// A form a sentence can have.
pub struct Form {
    /// Its parts, in order.
    pub parts: &'static [Part],
    /// One such sentence.
    pub example: &'static str,
    /// What it does.
    pub does: &'static str,
    make: Make,
}

use Part::{Slot as S, Word as W};

/// All sentences. Of those that begin alike, the longer one comes first.
pub static FORMS: &[Form] = &[
    Form {
        parts: &[W("to"), S(Slot::Moment)],
        example: "to 12 h",
        does: "go to a time, `end`, or a date",
        make: |filled, layout| moment(filled[0], layout).map(Sentence::To),
    },
    Form {
        parts: &[W("step"), S(Slot::Time), W("of"), S(Slot::Node)],
        example: "step 1 s of s5",
        does: "step by this much of its own clock",
        make: |filled, layout| {
            let (length, of) = (length(filled[0])?, row(filled[1], layout)?);
            Ok(Sentence::Step(Step { length, of: Some(of) }))
        },
    },
    Form {
        parts: &[W("step"), S(Slot::Time)],
        example: "step 1 s",
        does: "step by this much array time",
        make: |filled, _| Ok(Sentence::Step(Step { length: length(filled[0])?, of: None })),
    },
    Form {
        parts: &[W("against"), S(Slot::Node)],
        example: "against s5",
        does: "rates and offsets against this node",
        make: |filled, layout| row(filled[0], layout).map(|row| Sentence::Against(Some(row))),
    },
    Form {
        parts: &[W("against")],
        example: "against",
        does: "show them against the reference again",
        make: |_, _| Ok(Sentence::Against(None)),
    },
    Form {
        parts: &[W("pace"), S(Slot::Number)],
        example: "pace 60",
        does: "run at so many s of array time a second",
        make: |filled, _| pace(filled[0]).map(Sentence::Pace),
    },
    Form {
        parts: &[W("hold"), S(Slot::Acceleration)],
        example: "hold 0.2 g0",
        does: "what if: hold it from now on",
        make: |filled, _| {
            let acceleration_m_s2 = quantity(filled[0], Dimension::Acceleration)?;
            Ok(Sentence::Change(EventKind::Hold { acceleration_m_s2 }))
        },
    },
    Form {
        parts: &[W("ramp"), S(Slot::Acceleration), W("for"), S(Slot::Time)],
        example: "ramp 0.1 g0 for 10 min",
        does: "what if: go there, then hold it",
        make: |filled, _| {
            let to_m_s2 = quantity(filled[0], Dimension::Acceleration)?;
            Ok(Sentence::Change(EventKind::Ramp { to_m_s2, length: length(filled[1])? }))
        },
    },
    Form {
        parts: &[W("plan")],
        example: "plan",
        does: "what if: back to the plan as filed, from now on",
        make: |_, _| Ok(Sentence::Change(EventKind::Plan)),
    },
    Form {
        parts: &[W("move"), S(Slot::Node), W("to"), S(Slot::Position)],
        example: "move s3 to -15.2 km",
        does: "what if: the node stands there",
        make: |filled, layout| {
            let node = name(filled[0], layout)?;
            let position_m = quantity(filled[1], Dimension::Length)?;
            Ok(Sentence::Change(EventKind::Move { node, position_m }))
        },
    },
    Form {
        parts: &[W("release"), S(Slot::Node)],
        example: "release s8",
        does: "what if: it leaves the line",
        make: |filled, layout| {
            Ok(Sentence::Change(EventKind::Release { node: name(filled[0], layout)? }))
        },
    },
    Form {
        parts: &[W("fail"), S(Slot::Node), W("and"), S(Slot::Node)],
        example: "fail hub and s1",
        does: "what if: their link stops working",
        make: |filled, layout| {
            let between = [name(filled[0], layout)?, name(filled[1], layout)?];
            Ok(Sentence::Change(EventKind::Fail { between }))
        },
    },
    Form {
        parts: &[W("mend"), S(Slot::Node), W("and"), S(Slot::Node)],
        example: "mend hub and s1",
        does: "what if: it works again",
        make: |filled, layout| {
            let between = [name(filled[0], layout)?, name(filled[1], layout)?];
            Ok(Sentence::Change(EventKind::Mend { between }))
        },
    },
    Form {
        parts: &[W("reach"), W("of"), W("stations")],
        example: "reach of stations",
        does: "the stations again",
        make: |_, _| Ok(Sentence::ReachOf(None)),
    },
    Form {
        parts: &[W("reach"), W("of"), S(Slot::Node)],
        example: "reach of s8",
        does: "what it passes once let go",
        make: |filled, layout| row(filled[0], layout).map(|row| Sentence::ReachOf(Some(row))),
    },
    Form {
        parts: &[W("zoom"), W("in")],
        example: "zoom in",
        does: "the launch frame twice as large",
        make: |_, _| Ok(Sentence::Chart(Shift::Zoom(1))),
    },
    Form {
        parts: &[W("zoom"), W("out")],
        example: "zoom out",
        does: "half as large",
        make: |_, _| Ok(Sentence::Chart(Shift::Zoom(-1))),
    },
    Form {
        parts: &[W("zoom"), W("all")],
        example: "zoom all",
        does: "so that the signal just fits",
        make: |_, _| Ok(Sentence::Chart(Shift::All)),
    },
    Form {
        parts: &[W("pan"), W("fore"), S(Slot::Position)],
        example: "pan fore 1 ly",
        does: "look farther fore in the launch frame",
        make: |filled, _| {
            let length_m = quantity(filled[0], Dimension::Length)?;
            Ok(Sentence::Chart(Shift::Fore(length_m)))
        },
    },
    Form {
        parts: &[W("pan"), W("aft"), S(Slot::Position)],
        example: "pan aft 1 ly",
        does: "farther aft",
        make: |filled, _| {
            let length_m = quantity(filled[0], Dimension::Length)?;
            Ok(Sentence::Chart(Shift::Fore(-length_m)))
        },
    },
    Form {
        parts: &[W("pan"), W("later"), S(Slot::Time)],
        example: "pan later 1 h",
        does: "at later launch times",
        make: |filled, _| Ok(Sentence::Chart(Shift::Later(length(filled[0])?.to_f64()))),
    },
    Form {
        parts: &[W("pan"), W("earlier"), S(Slot::Time)],
        example: "pan earlier 1 h",
        does: "at earlier launch times",
        make: |filled, _| Ok(Sentence::Chart(Shift::Later(-length(filled[0])?.to_f64()))),
    },
    Form {
        parts: &[W("note"), S(Slot::Text)],
        example: "note tether paid out",
        does: "a remark at this moment",
        make: |filled, _| Ok(Sentence::Change(EventKind::Note { text: filled[0].to_owned() })),
    },
    Form {
        parts: &[W("record"), W("to"), S(Slot::File)],
        example: "record to run.jsonl",
        does: "record into a new file, a frame a step",
        make: |filled, _| Ok(Sentence::RecordTo(filled[0].to_owned())),
    },
    Form {
        parts: &[W("record"), W("close")],
        example: "record close",
        does: "close the recording",
        make: |_, _| Ok(Sentence::RecordClose),
    },
    Form {
        parts: &[W("save"), W("as"), S(Slot::File)],
        example: "save as flown.toml",
        does: "the layout, its plan as flown",
        make: |filled, _| Ok(Sentence::SaveAs(filled[0].to_owned())),
    },
    Form {
        parts: &[W("undo")],
        example: "undo",
        does: "take the last what-if or note back",
        make: |_, _| Ok(Sentence::Undo),
    },
];

impl Form {
    /// Its first word.
    pub fn first_word(&self) -> &'static str {
        match self.parts.first() {
            Some(Part::Word(word)) => word,
            _ => "",
        }
    }

    /// The form as the list of sentences shows it: `ramp ACCELERATION for TIME`.
    pub fn pattern(&self) -> String {
        let words: Vec<&str> = self
            .parts
            .iter()
            .map(|part| match part {
                Part::Word(word) => word,
                Part::Slot(slot) => slot.word(),
            })
            .collect();
        words.join(" ")
    }

    /// What a text fills into the slots, if it has this form.
    fn filled<'t>(&self, text: &'t str) -> Option<Vec<&'t str>> {
        let mut rest = text.trim();
        let mut filled = Vec::new();
        for (index, part) in self.parts.iter().enumerate() {
            match part {
                Part::Word(word) => rest = after_word(rest, word)?,
                Part::Slot(slot) => {
                    let end = match self.parts.get(index + 1) {
                        Some(Part::Word(word)) => place_of_word(rest, word, *slot)?,
                        _ => rest.len(),
                    };
                    let (inside, after) = rest.split_at(end);
                    if inside.trim().is_empty() {
                        return None;
                    }
                    filled.push(inside.trim());
                    rest = after.trim_start();
                }
            }
        }
        rest.is_empty().then_some(filled)
    }
}

/// What follows a word that a text begins with.
pub fn after_word<'t>(text: &'t str, word: &str) -> Option<&'t str> {
    let rest = text.strip_prefix(word)?;
    (rest.is_empty() || rest.starts_with(' ')).then(|| rest.trim_start())
}

/// Where a word stands behind what fills a slot. The name of a node may hold the word
/// itself, so the last place counts there.
pub fn place_of_word(text: &str, word: &str, slot: Slot) -> Option<usize> {
    let stands_alone = |(at, _): &(usize, &str)| {
        text[..*at].ends_with(' ')
            && (text[at + word.len()..].is_empty() || text[at + word.len()..].starts_with(' '))
    };
    let mut places = text.match_indices(word).filter(stands_alone).map(|(at, _)| at);
    if slot == Slot::Node { places.last() } else { places.next() }
}

/// Reads a sentence.
pub fn read(text: &str, layout: &Layout) -> Result<Sentence, Notice> {
    for form in FORMS {
        if let Some(filled) = form.filled(text) {
            return (form.make)(&filled, layout);
        }
    }
    let first = text.split_whitespace().next().unwrap_or("");
    let alike: Vec<&Form> = FORMS.iter().filter(|form| form.first_word() == first).collect();
    let Some(example) = alike.first().map(|form| form.example) else {
        return Err(unknown(first));
    };
    let patterns: Vec<String> = alike.iter().map(|form| format!("`{}`", form.pattern())).collect();
    Err(Notice::refused(
        format!("`{}` is not a whole sentence", text.trim()),
        format!("the sentence is {}", patterns.join(" or ")),
        format!("for example `{example}`"),
    ))
}

fn unknown(first: &str) -> Notice {
    let mut words: Vec<&str> = FORMS.iter().map(Form::first_word).collect();
    words.dedup();
    let nearest = words.iter().min_by_key(|word| distance(first, word)).copied().unwrap_or("to");
    let remedy = if distance(first, nearest) <= 1 + nearest.chars().count() / 4 {
        format!("did you mean `{nearest}`? 0 at the table lists all sentences")
    } else {
        "0 at the table lists all sentences".to_owned()
    };
    Notice::refused(
        format!("no sentence begins with `{first}`"),
        format!("the first word is one of {}", words.join(" ")),
        remedy,
    )
}

/// How many signs have to be put in, taken out or changed to make one word the other.
fn distance(left: &str, right: &str) -> usize {
    let right: Vec<char> = right.chars().collect();
    let mut row: Vec<usize> = (0..=right.len()).collect();
    for (place, sign) in left.chars().take(64).enumerate() {
        let mut diagonal = row[0];
        row[0] = place + 1;
        for (column, other) in right.iter().enumerate() {
            let changed = diagonal + usize::from(sign != *other);
            diagonal = row[column + 1];
            row[column + 1] = changed.min(diagonal + 1).min(row[column] + 1);
        }
    }
    row[right.len()]
}

/// The end of the plan as filed; a day for a standing line, which has none.
pub fn end_of_plan(layout: &Layout) -> ArrayTime {
    match &layout.course {
        Course::Thrust(plan) => plan.end(),
        Course::Standing(_) => ArrayTime::from_seconds(86_400),
    }
}

fn moment(text: &str, layout: &Layout) -> Result<ArrayTime, Notice> {
    parse_moment(text, layout.epoch.as_ref(), end_of_plan(layout))
        .map_err(|fault| Notice::unreadable(text, &fault))
}

fn length(text: &str) -> Result<ArrayTime, Notice> {
    quantity::parse_length_of_time(text).map_err(|fault| Notice::unreadable(text, &fault))
}

fn quantity(text: &str, dimension: Dimension) -> Result<f64, Notice> {
    quantity::parse(text, dimension).map_err(|fault| Notice::unreadable(text, &fault))
}

fn pace(text: &str) -> Result<f64, Notice> {
    let pace = quantity(text, Dimension::Number)?;
    if (1e-9..=1e9).contains(&pace) {
        return Ok(pace);
    }
    Err(Notice::refused(
        format!("a pace of {text}"),
        "a pace is from 1e-9 to 1e9 seconds of array time per second",
        "for example `pace 60`",
    ))
}

fn row(text: &str, layout: &Layout) -> Result<usize, Notice> {
    layout.nodes.iter().position(|node| node.name == text).ok_or_else(|| {
        Notice::refused(
            format!("there is no node `{text}`"),
            "a node goes by its name in the layout",
            "Tab completes names as they are typed",
        )
    })
}

fn name(text: &str, layout: &Layout) -> Result<String, Notice> {
    row(text, layout).map(|row| layout.nodes[row].name.to_string())
}
