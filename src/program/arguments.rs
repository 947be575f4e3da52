//! The command line.

use std::path::PathBuf;

use clap::error::{ContextKind, ContextValue, ErrorKind};
use clap::{Args, Parser, Subcommand, ValueEnum};

use super::problem::Problem;

/// Predicts, steps, records and replays the clocks of a line that keeps its length
/// while it accelerates.
///
/// Without a command: opens the desk on a built-in layout, or prints that layout's
/// rates when standard output is no terminal.
#[derive(Debug, Parser)]
#[command(
    name = "clockspar",
    version,
    disable_help_subcommand = true,
    args_conflicts_with_subcommands = true
)]
pub struct Arguments {
    /// What to do.
    #[command(subcommand)]
    pub command: Option<Command>,
    /// How the desk looks.
    #[command(flatten)]
    pub look: Look,
    /// Whose preferences count.
    #[command(flatten)]
    pub preferences: PreferenceArguments,
}

impl Arguments {
    /// The command line as it was given. Asked for help, the program ends with that.
    pub fn given() -> Result<Arguments, Problem> {
        Arguments::try_parse().or_else(|error| match (error.kind(), odd_word(&error)) {
            (ErrorKind::UnknownArgument, Some(word)) if !word.starts_with('-') => {
                Err(Problem::new(
                    format_args!("`{word}` is one word too many"),
                    "a value of several words stands in quotes",
                    "write for example --at \"12 h\"; `clockspar --help` lists what there is",
                ))
            }
            _ => error.exit(),
        })
    }
}

fn odd_word(error: &clap::Error) -> Option<&str> {
    match error.get(ContextKind::InvalidArg)? {
        ContextValue::String(word) => Some(word),
        _ => None,
    }
}

/// The commands.
#[derive(Debug, Subcommand)]
pub enum Command {
    /// The interactive front end: step array time, tables, what-if, record
    Desk(DeskArguments),
    /// Every rule the layout must meet, with margins
    Check(TableArguments),
    /// Per node: position, horizon, felt acceleration, rate, redshift, clock offset, event
    Rates(TableArguments),
    /// Clock offsets against the reference, or of every ordered pair
    Offsets(OffsetsArguments),
    /// Forces, stretch, propellant; peaks over the plan
    Loads(TableArguments),
    /// Per link and direction: flight times, shift, received frequency, round trip, two-way error
    Links(TableArguments),
    /// Stations, last call, contact tables; released nodes and what they pass
    Reach(ReachArguments),
    /// Two layouts or recordings: rows of differences
    Compare(CompareArguments),
    /// A run to a recording, without a terminal
    Record(RecordArguments),
    /// A recording in the desk, or as a table when there is no terminal
    Replay(ReplayArguments),
    /// Recomputes a recording and says whether every number still holds
    Verify(VerifyArguments),
}

/// Arguments of the desk.
#[derive(Debug, Args)]
pub struct DeskArguments {
    /// Layout file, or `-` for standard input
    pub layout: PathBuf,
    /// How it looks.
    #[command(flatten)]
    pub look: Look,
    /// Whose preferences count.
    #[command(flatten)]
    pub preferences: PreferenceArguments,
}

/// How the desk looks.
#[derive(Clone, Debug, Default, Args)]
pub struct Look {
    /// Colour: by the environment, always, or never
    #[arg(long, value_enum, value_name = "WHEN", alias = "color")]
    pub colour: Option<When>,
    /// Draw with ASCII characters only
    #[arg(long, conflicts_with = "unicode")]
    pub ascii: bool,
    /// Draw with Unicode characters whatever the locale says
    #[arg(long)]
    pub unicode: bool,
}

/// Which file of preferences to use, for display only.
#[derive(Clone, Debug, Default, Args)]
pub struct PreferenceArguments {
    /// Use this file of preferences: units, columns, colour, marks and width of the text form
    /// [default: clockspar/preferences.toml in the folder for configuration]
    #[arg(long, value_name = "FILE", conflicts_with = "no_preferences")]
    pub preferences: Option<PathBuf>,
    /// Use no preferences
    #[arg(long)]
    pub no_preferences: bool,
}

/// When to use colour.
#[derive(Clone, Copy, Debug, PartialEq, Eq, ValueEnum)]
pub enum When {
    /// As `NO_COLOR`, `CLICOLOR_FORCE` and the terminal say.
    Auto,
    /// Always.
    Always,
    /// Never.
    Never,
}

/// Forms of a table.
#[derive(Clone, Copy, Debug, PartialEq, Eq, ValueEnum)]
pub enum Form {
    /// For people.
    Text,
    /// RFC 4180.
    Csv,
    /// One object.
    Json,
}

/// Which moments of array time to show.
#[derive(Clone, Debug, Default, Args)]
pub struct MomentArguments {
    /// Moment: a duration, `end`, or a date when the layout has an epoch
    /// [default: the middle of the first hold, else 0; 1 d of a line that stands; `check` takes
    /// the whole plan, recordings every frame]
    #[arg(long, value_name = "MOMENT", allow_hyphen_values = true, conflicts_with_all = ["from", "until", "every"])]
    pub at: Option<String>,
    /// First moment of a table over time [default: 0]
    #[arg(long, value_name = "MOMENT", allow_hyphen_values = true, requires = "every")]
    pub from: Option<String>,
    /// Last moment of a table over time [default: end]
    #[arg(long, value_name = "MOMENT", allow_hyphen_values = true, requires = "every")]
    pub until: Option<String>,
    /// Step of a table over time
    #[arg(long, value_name = "TIME", allow_hyphen_values = true)]
    pub every: Option<String>,
    /// Print the table over time at wall-clock pace
    #[arg(long, requires = "every")]
    pub paced: bool,
}

/// Where and how a table is written.
#[derive(Clone, Debug, Default, Args)]
pub struct OutputArguments {
    /// Form of the table
    #[arg(long = "as", value_enum, value_name = "FORM")]
    pub form: Option<Form>,
    /// Write to this file, whole or not at all
    #[arg(long, value_name = "FILE")]
    pub out: Option<PathBuf>,
    /// Write over an existing file
    #[arg(long)]
    pub replace: bool,
    /// Which table, where a command has several
    #[arg(long, value_name = "NAME")]
    pub table: Option<String>,
    /// Only the rows of these nodes: names and ranges, such as `hub,s2..s7`
    #[arg(long, value_name = "LIST", allow_hyphen_values = true)]
    pub nodes: Option<String>,
    /// Only these columns, in this order: keys of the row, such as `node,clock_offset_s`
    #[arg(long, value_name = "LIST")]
    pub columns: Option<String>,
    /// Unit of a column of the text form, such as `clock_offset=ps`; may be repeated
    #[arg(long, value_name = "KEY=UNIT")]
    pub unit: Vec<String>,
    /// Whose preferences count.
    #[command(flatten)]
    pub preferences: PreferenceArguments,
}

impl OutputArguments {
    /// The form of the table, text unless another was asked for.
    pub fn form(&self) -> Form {
        self.form.unwrap_or(Form::Text)
    }

    /// Whether anything was asked that only a table can answer.
    pub fn wants_table(&self) -> bool {
        self.form.is_some()
            || self.out.is_some()
            || self.table.is_some()
            || self.nodes.is_some()
            || self.columns.is_some()
            || !self.unit.is_empty()
    }
}

/// Arguments of a table command.
#[derive(Clone, Debug, Args)]
pub struct TableArguments {
    /// Layout file, or `-` for standard input
    pub layout: PathBuf,
    /// Which moments.
    #[command(flatten)]
    pub moments: MomentArguments,
    /// Where and how.
    #[command(flatten)]
    pub output: OutputArguments,
}

/// Arguments of `offsets`.
#[derive(Clone, Debug, Args)]
pub struct OffsetsArguments {
    /// As for every table.
    #[command(flatten)]
    pub table: TableArguments,
    /// Add the table of every ordered pair
    #[arg(long)]
    pub pairs: bool,
}

/// Arguments of `reach`.
#[derive(Clone, Debug, Args)]
pub struct ReachArguments {
    /// As for every table.
    #[command(flatten)]
    pub table: TableArguments,
    /// Let this node go at the moment: adds what it passes and how it is heard
    #[arg(long, value_name = "NODE")]
    pub release: Option<String>,
    /// Add the spans of sending time from which nothing arrives before this moment
    #[arg(long, value_name = "MOMENT", allow_hyphen_values = true)]
    pub before: Option<String>,
}

/// Arguments of `compare`.
#[derive(Clone, Debug, Args)]
pub struct CompareArguments {
    /// First layout or recording
    pub a: PathBuf,
    /// Second
    pub b: PathBuf,
    /// Which moments.
    #[command(flatten)]
    pub moments: MomentArguments,
    /// Where and how.
    #[command(flatten)]
    pub output: OutputArguments,
}

/// Arguments of `record`.
#[derive(Clone, Debug, Args)]
pub struct RecordArguments {
    /// Layout file, or `-` for standard input
    pub layout: PathBuf,
    /// First moment
    #[arg(long, value_name = "MOMENT", allow_hyphen_values = true)]
    pub from: Option<String>,
    /// Last moment
    #[arg(long, value_name = "MOMENT", allow_hyphen_values = true)]
    pub until: String,
    /// Step between frames
    #[arg(long, value_name = "TIME", allow_hyphen_values = true)]
    pub every: String,
    /// Recording file to write
    #[arg(long, value_name = "FILE")]
    pub out: PathBuf,
    /// Put it in the place of an existing file as soon as its first line is on the disk
    #[arg(long)]
    pub replace: bool,
}

/// Arguments of `replay`.
#[derive(Clone, Debug, Args)]
pub struct ReplayArguments {
    /// Recording file
    pub file: PathBuf,
    /// Print every frame, then those that are appended, until the recording is closed
    #[arg(long, conflicts_with_all = ["at", "from", "until", "every", "paced", "out", "replace"])]
    pub follow: bool,
    /// Which moments.
    #[command(flatten)]
    pub moments: MomentArguments,
    /// Where and how; any of them chooses the table instead of the desk.
    #[command(flatten)]
    pub output: OutputArguments,
    /// How the desk looks.
    #[command(flatten)]
    pub look: Look,
}

/// Arguments of `verify`.
#[derive(Clone, Debug, Args)]
pub struct VerifyArguments {
    /// Recording file
    pub file: PathBuf,
    /// Where and how.
    #[command(flatten)]
    pub output: OutputArguments,
}
