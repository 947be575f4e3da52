//! From what was written to a checked [`Layout`]: references, sums, and what excludes
//! what.

mod course;
mod csv;
mod history;
mod index;
mod nodes;
mod parts;
mod rows;
mod series;
mod survey;

use sha2::{Digest, Sha256};

use super::fault::{Collector, Faults, Spot};
use super::quantity::short;
use super::written::{self, Field, Written};
use super::{Layout, Positions};
use crate::cores;
use survey::{Reading, Table};

/// Most nodes a line may have.
pub const MOST_NODES: usize = 1_000_000;

/// Farthest position from the reference, and from the origin of the launch frame, m.
pub const FARTHEST_POSITION_M: f64 = 1.0e19;

/// Largest layout text read, in bytes.
pub const LARGEST_LAYOUT_BYTES: usize = 128 << 20;

/// Most marks (brackets, quotes, `=`, blanks, line ends and the like) in a layout text; the
/// parser needs about 100 bytes for each. A million nodes with four keys have 40 million.
const MOST_MARKS: usize = 64_000_000;

/// Largest table of positions or accelerations read, in bytes.
pub const LARGEST_TABLE_BYTES: usize = 256 << 20;

/// The exact text a layout was read from, and the files it names.
#[derive(Clone, Debug, Default, PartialEq, Eq)]
pub struct Source {
    /// Name of the layout file, as given by the caller.
    pub file_name: String,
    /// Its text.
    pub text: String,
    /// SHA-256 of the text, 64 lower-case hexadecimal digits.
    pub sha256: String,
    /// The files it names: the survey, then the history.
    pub files: Vec<SourceFile>,
}

/// A file named in a layout.
#[derive(Clone, Debug, Default, PartialEq, Eq)]
pub struct SourceFile {
    /// Its name, as the layout writes it.
    pub name: String,
    /// Its text.
    pub text: String,
    /// SHA-256 of the text, 64 lower-case hexadecimal digits.
    pub sha256: String,
}

/// Reads a layout from its text.
///
/// `file_name` only serves the messages; `files` gives the text of a file that the layout
/// names (its survey, its history), or the reason why there is none. The library opens no
/// file itself.
///
/// What it checks is everything that needs no physics: form, types, units, ranges, names,
/// references, shares, gaps covered twice, the thrust plan. Whether a node falls behind
/// the horizon is for [`crate::model`].
///
/// # Errors
///
/// Every fault found in the layout and its files, each with its place, rule and remedy.
/// Faults of syntax hide faults of meaning on the same lines only; what compares one part
/// of the file with another is judged once the syntax is right.
pub fn read(
    file_name: &str,
    text: &str,
    files: &dyn Fn(&str) -> Result<String, String>,
) -> Result<Layout, Faults> {
    let mut faults = Collector::default();
    if text.len() > LARGEST_LAYOUT_BYTES {
        let rule = format!("a layout has at most {} MiB", LARGEST_LAYOUT_BYTES >> 20);
        faults.fault(Spot::default(), rule, "put positions into a survey, or shorten the file");
        return Err(faults.into_faults(&[(file_name, "")]).unwrap_or_default());
    }
    if text.len() > MOST_MARKS && count_marks(text) > MOST_MARKS {
        let rule = format!("a layout has at most {} million marks", MOST_MARKS / 1_000_000);
        faults.fault(Spot::default(), rule, "put positions into a survey, or shorten the file");
        return Err(faults.into_faults(&[(file_name, "")]).unwrap_or_default());
    }
    let mut written = written::read_document(text, &mut faults);
    if faults.has_syntax() {
        return Err(faults.into_faults(&[(file_name, text)]).unwrap_or_default());
    }
    let survey_name = written.survey.as_ref().and_then(|survey| survey.file.stated());
    let history_name = written.acceleration.as_ref().and_then(|part| part.history.stated());
    let mut named = Vec::new();
    let survey = survey_name.and_then(|name| open(name, files, &mut named, &mut faults));
    let history = history_name.and_then(|name| open(name, files, &mut named, &mut faults));

    let (layout, digests) = judge(&mut written, survey, history, &named, &mut faults);
    for (file, sha256) in named.iter_mut().zip(digests) {
        file.sha256 = sha256;
    }
    if let Some(mut layout) = layout
        && faults.is_empty()
    {
        layout.source = Source {
            file_name: file_name.to_owned(),
            text: text.to_owned(),
            sha256: sha256(text),
            files: named,
        };
        return Ok(layout);
    }
    let mut texts = vec![(file_name, text)];
    texts.extend(named.iter().map(|file| (file.name.as_str(), file.text.as_str())));
    Err(faults.into_faults(&texts).unwrap_or_default())
}

/// Compares the parts of a layout with each other, and makes the digests of the tables it
/// names, beside that where a table is long.
fn judge(
    written: &mut Written,
    survey: Option<u32>,
    history: Option<u32>,
    named: &[SourceFile],
    faults: &mut Collector,
) -> (Option<Layout>, Vec<String>) {
    let digests = || named.iter().map(|file| sha256(&file.text)).collect();
    let is_long = survey
        .and_then(|file| text_of(named, file))
        .is_some_and(|text| Reading::of(text) == Reading::OnAllCores);
    let by_row = survey.map(|file| (file, Reading::RowByRow));
    if !is_long || !faults.is_empty() {
        return (check(written, by_row, history, named, faults), digests());
    }
    let on_all_cores = survey.map(|file| (file, Reading::OnAllCores));
    let mut again = written.clone();
    let fast = || check(written, on_all_cores, history, named, faults);
    let (layout, digests) = cores::both(fast, digests);
    if layout.is_some() && faults.is_empty() {
        return (layout, digests);
    }
    // What is wrong is looked for again, with its place.
    *faults = Collector::default();
    (check(&mut again, by_row, history, named, faults), digests)
}

/// The text of a file the layout names, by its number from 1.
fn text_of(named: &[SourceFile], file: u32) -> Option<&str> {
    named.get((file as usize).checked_sub(1)?).map(|file| file.text.as_str())
}

/// About how many pieces the parser will cut a text into.
fn count_marks(text: &str) -> usize {
    let is_mark = |byte: &u8| !(byte.is_ascii_alphanumeric() || *byte >= 0x80);
    text.bytes().filter(is_mark).count()
}

/// SHA-256 of a text, as 64 lower-case hexadecimal digits (FIPS 180-4).
#[must_use]
pub fn sha256(text: &str) -> String {
    Sha256::digest(text.as_bytes()).iter().map(|byte| format!("{byte:02x}")).collect()
}

/// Asks for a file the layout names; returns its number among the texts, from 1.
fn open(
    (name, spot): (&String, Spot),
    files: &dyn Fn(&str) -> Result<String, String>,
    named: &mut Vec<SourceFile>,
    faults: &mut Collector,
) -> Option<u32> {
    match files(name) {
        Ok(text) if text.len() <= LARGEST_TABLE_BYTES => {
            // The digest takes its time, and is made while the text is read.
            named.push(SourceFile { name: name.clone(), text, sha256: String::new() });
            u32::try_from(named.len()).ok()
        }
        Ok(_) => {
            let rule = format!("a table has at most {} MiB", LARGEST_TABLE_BYTES >> 20);
            faults.fault(spot, rule, "shorten the table");
            None
        }
        Err(reason) => {
            let rule = format!(
                "a file named in a layout can be read; `{}` could not: {reason}",
                short(name)
            );
            faults.fault(
                spot,
                rule,
                "name a file of UTF-8 text that exists, relative to the layout",
            );
            None
        }
    }
}

/// Compares the parts of a layout with each other; `None` when a part is missing that
/// the rest needs, or the survey has to be read in another way.
fn check(
    written: &mut Written,
    survey: Option<(u32, Reading)>,
    history: Option<u32>,
    named: &[SourceFile],
    faults: &mut Collector,
) -> Option<Layout> {
    let survey = survey
        .and_then(|(file, reading)| Some(Table { file, text: text_of(named, file)?, reading }));
    let history = history.and_then(|file| Some((file, text_of(named, file)?)));
    let positions = written.positions.value().copied().unwrap_or(Positions::Unloaded);
    if let (Positions::AsFlown, Some(spot)) = (positions, written.positions.spot())
        && written.design_acceleration.is_absent()
    {
        faults.fault(
            spot,
            "positions `as flown` hold at a stated design acceleration",
            "add for example `design_acceleration = \"0.02 g0\"`, or write `unloaded`",
        );
    }
    let course = course::check(written, history, faults);
    let gathered = nodes::gather(written, survey, faults)?;
    let line = rows::Rows::arrange(gathered, written, faults)?;
    course::check_gradient(written, &line, faults);

    let spans = parts::spans(written, &line, faults);
    let engines = parts::engines(written, &line, faults);
    let links = parts::links(written, &line, faults);
    let limits = parts::limits(written, &line, faults);
    let stations = parts::stations(written, faults);
    let equal_shift = series::placed_by_equal_shift(written);
    let (course, acceleration_uncertainty) = course?;
    Some(Layout {
        name: std::mem::take(&mut written.name).into_value()?,
        revision: written.revision.take(),
        epoch: written.epoch.take(),
        positions,
        design_acceleration_m_s2: std::mem::take(&mut written.design_acceleration).into_value(),
        reference: line.reference,
        nodes: line.nodes,
        spans,
        engines,
        course,
        acceleration_uncertainty,
        clocks: std::mem::take(&mut written.clocks),
        links,
        stations,
        limits,
        notes: std::mem::take(&mut written.notes),
        equal_shift,
        source: Source::default(),
    })
}

/// A reference to a name, with the place to blame.
type Named<'a> = (&'a str, Spot);

/// The name a field states, when it does.
fn named(field: &Field<String>) -> Option<Named<'_>> {
    field.stated().map(|(name, spot)| (name.as_str(), spot))
}
