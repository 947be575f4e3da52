//! Choosing units of the text form.

use std::fmt;

use super::{ChoiceFault, SI_ENDINGS, bare_key, key_of_heading};
use crate::layout::nearest::nearest;
use crate::layout::quantity::{UnitFactor, find_unit, short};
use crate::table::unit::{Unit, dimension_of};
use crate::table::{Measure, Report};

/// Units asked for, by the keys of columns.
#[derive(Clone, Debug, Default)]
pub struct Units {
    chosen: Vec<(String, UnitFactor)>,
}

/// What is wrong with a unit.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct UnitFault {
    /// What holds.
    pub rule: String,
    /// What would be right.
    pub remedy: String,
}

impl fmt::Display for UnitFault {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        write!(f, "{}; {}", self.rule, self.remedy)
    }
}

impl std::error::Error for UnitFault {}

impl Units {
    /// None asked for.
    #[must_use]
    pub fn new() -> Units {
        Units::default()
    }

    /// Reads `KEY=UNIT`; the key may leave out the SI unit it ends in.
    ///
    /// # Errors
    ///
    /// Another form, a unit that is not known, a key asked for twice.
    pub fn read(&mut self, text: &str) -> Result<(), ChoiceFault> {
        let Some((key, unit)) = text.split_once('=') else {
            let rule = "a unit is chosen as KEY=UNIT";
            return Err(ChoiceFault::new(text, rule, "write for example `clock_offset=ps`"));
        };
        let (key, unit) = (key.trim(), unit.trim());
        if unit.contains('=') {
            let rule = "one KEY=UNIT stands behind each --unit";
            return Err(ChoiceFault::new(text, rule, "repeat --unit for each of them"));
        }
        if self.chosen.iter().any(|(known, _)| is_same(known, key)) {
            let rule = format!("`{}` is shown in one unit", short(key));
            return Err(ChoiceFault::new(text, rule, "take one of the two away"));
        }
        self.ask(key, unit).map_err(|fault| ChoiceFault::new(text, fault.rule, fault.remedy))
    }

    /// Asks for a unit, in place of one asked for before.
    ///
    /// # Errors
    ///
    /// A unit that is not known.
    pub fn ask(&mut self, key: &str, unit: &str) -> Result<(), UnitFault> {
        let Some(found) = find_unit(unit) else {
            let all = crate::layout::quantity::all_units();
            return Err(UnitFault {
                rule: format!("`{}` is not a unit known here; capitals count", short(unit)),
                remedy: match nearest(unit, all.clone()) {
                    Some(meant) => format!("write `{meant}`"),
                    None => format!("the units are {}", all.collect::<Vec<_>>().join(" ")),
                },
            });
        };
        self.chosen.retain(|(known, _)| known != key);
        self.chosen.push((key.to_owned(), *found));
        Ok(())
    }

    /// Whether none was asked for.
    #[must_use]
    pub fn is_empty(&self) -> bool {
        self.chosen.is_empty()
    }

    /// The keys and the names of the units, in the order asked.
    pub fn iter(&self) -> impl Iterator<Item = (&str, &'static str)> {
        self.chosen.iter().map(|(key, unit)| (key.as_str(), unit.name))
    }

    /// These, and others for the keys that are not among them.
    #[must_use]
    pub fn or(mut self, others: Units) -> Units {
        for (key, unit) in others.chosen {
            if self.chosen.iter().all(|(known, _)| *known != key) {
                self.chosen.push((key, unit));
            }
        }
        self
    }

    /// Takes away what was asked for a key.
    pub fn forget(&mut self, key: &str) {
        self.chosen.retain(|(known, _)| known != key);
    }

    /// Whether a report can be shown in these units.
    ///
    /// # Errors
    ///
    /// The key of the first that it cannot be, and why: no column of that key, or another
    /// dimension.
    pub fn check(&self, report: &Report<'_>) -> Result<(), (String, UnitFault)> {
        for (key, unit) in &self.chosen {
            match fault_of(key, *unit, report) {
                Some(Fault::Unfit(fault) | Fault::Unknown(fault)) => {
                    return Err((key.clone(), fault));
                }
                None => {}
            }
        }
        Ok(())
    }

    /// The same for wishes that concern many reports: those whose column this one does not
    /// have are passed over. All that do not fit are listed by their keys.
    #[must_use]
    pub fn unfit(&self, report: &Report<'_>) -> Vec<(String, UnitFault)> {
        let unfit = |(key, unit): &(String, UnitFactor)| match fault_of(key, *unit, report) {
            Some(Fault::Unfit(fault)) => Some((key.clone(), fault)),
            _ => None,
        };
        self.chosen.iter().filter_map(unfit).collect()
    }

    /// The unit asked for a column, when it fits.
    pub(in crate::table) fn of(&self, key: &str, measure: Measure) -> Option<Unit> {
        let (_, unit) = self.chosen.iter().find(|(wanted, _)| is_meant(wanted, key, measure))?;
        (Some(unit.dimension) == dimension_of(measure)).then(|| Unit::of_factor(*unit))
    }
}

enum Fault {
    /// The report has no such column.
    Unknown(UnitFault),
    /// The column cannot be shown in the unit.
    Unfit(UnitFault),
}

/// Whether two keys mean the same but for the SI unit at the end of one of them.
fn is_same(a: &str, b: &str) -> bool {
    let with_unit = |long: &str, short: &str| {
        long.strip_prefix(short).is_some_and(|unit| SI_ENDINGS.contains(&unit))
    };
    a == b || with_unit(a, b) || with_unit(b, a)
}

fn is_meant(wanted: &str, key: &str, measure: Measure) -> bool {
    wanted == key || bare_key(key, measure) == Some(wanted)
}

fn fault_of(key: &str, unit: UnitFactor, report: &Report<'_>) -> Option<Fault> {
    let columns = report.tables.iter().flat_map(|table| &table.columns);
    let mut known: Vec<(&str, Measure)> =
        columns.map(|column| (column.key, column.measure)).collect();
    known.extend(report.scalars.iter().map(|scalar| (scalar.key, scalar.measure)));
    let meant = known.iter().find(|(column, measure)| is_meant(key, column, *measure));
    let Some((column, measure)) = meant else {
        let with_unit = known.iter().filter(|(_, measure)| dimension_of(*measure).is_some());
        let mut keys: Vec<&str> = with_unit.map(|(column, _)| *column).collect();
        keys.dedup();
        let meant = key_of_heading(report, key).or_else(|| nearest(key, keys.iter().copied()));
        let remedy = match meant {
            Some(meant) => format!("write `{meant}`"),
            None if keys.is_empty() => "nothing here has a unit".to_owned(),
            None => format!("the keys are {}", keys.join(", ")),
        };
        let rule = format!("no column has the key `{}`", short(key));
        return Some(Fault::Unknown(UnitFault { rule, remedy }));
    };
    if *measure == Measure::Various {
        return Some(Fault::Unfit(UnitFault {
            rule: format!("the unit of `{column}` is stated row by row"),
            remedy: "leave this unit out".to_owned(),
        }));
    }
    let Some(dimension) = dimension_of(*measure) else {
        return Some(Fault::Unfit(UnitFault {
            rule: format!("`{column}` has no unit"),
            remedy: "leave this unit out".to_owned(),
        }));
    };
    (unit.dimension != dimension).then(|| {
        let units: Vec<&str> = dimension.units().collect();
        Fault::Unfit(UnitFault {
            rule: format!(
                "`{column}` is {}, and `{}` is no unit of it",
                dimension.words(),
                unit.name
            ),
            remedy: format!("the units are {}", units.join(" ")),
        })
    })
}
