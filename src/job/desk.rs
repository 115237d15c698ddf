//! Where faults are collected while a job is resolved.

use std::fmt::Display;

use super::given::{Given, Scalar, Scalars};
use crate::text::Fault;

/// Says that a fault has been noted, so that what depends on the value cannot go on.
#[derive(Clone, Copy, Debug)]
pub(super) struct Noted;

/// A value, or a fault that has been noted.
pub(super) type Checked<T> = Result<T, Noted>;

/// Where a value stands.
#[derive(Clone, Debug)]
pub(super) enum Place {
    /// At a path of the job file.
    Path(String),
    /// In a flag, as a whole.
    Flag(&'static str),
}

impl Place {
    /// The whole job file.
    pub fn job() -> Place {
        Place::Path(String::new())
    }

    /// The place of a key within this.
    pub fn key(&self, key: &str) -> Place {
        match self {
            Place::Path(path) if path.is_empty() => Place::Path(key.to_string()),
            Place::Path(path) => Place::Path(format!("{path}.{key}")),
            flag => flag.clone(),
        }
    }

    /// The place of a list member within this.
    pub fn item(&self, index: usize) -> Place {
        match self {
            Place::Path(path) => Place::Path(format!("{path}[{index}]")),
            flag => flag.clone(),
        }
    }

    /// The value of a key within this, where it is given, and where it stands.
    pub fn find<'a, T>(&self, key: &str, given: &'a Option<Given<T>>) -> Option<At<'a, T>> {
        let Given { value, flag } = given.as_ref()?;
        Some(At { value, place: flag.map_or_else(|| self.key(key), Place::Flag) })
    }

    /// Where the value of a key stands; this place where it is not given.
    pub fn of<T>(&self, key: &str, given: &Option<Given<T>>) -> Place {
        self.find(key, given).map_or_else(|| self.clone(), |at| at.place)
    }
}

/// A value and where it stands.
#[derive(Debug)]
pub(super) struct At<'a, T> {
    pub value: &'a T,
    pub place: Place,
}

/// Collects faults.
#[derive(Debug, Default)]
pub(super) struct Desk {
    pub faults: Vec<Fault>,
}

impl Desk {
    /// Notes a fault, once.
    pub fn note(&mut self, place: &Place, message: impl Into<String>, help: impl Into<String>) -> Noted {
        let path = match place {
            Place::Path(path) => path.as_str(),
            Place::Flag(flag) => flag,
        };
        let fault = Fault::at(path, message).help(help);
        if !self.faults.contains(&fault) {
            self.faults.push(fault);
        }
        Noted
    }

    /// The value of a scalar.
    pub fn value<T, E: Display>(
        &mut self,
        place: &Place,
        scalar: &Scalar,
        read: impl Fn(&str) -> Result<T, E>,
    ) -> Checked<T> {
        read(scalar.text()).map_err(|error| self.note(place, error.to_string(), ""))
    }

    /// The value of a scalar that may be missing.
    pub fn optional<T, E: Display>(
        &mut self,
        found: Option<At<'_, Scalar>>,
        read: impl Fn(&str) -> Result<T, E>,
    ) -> Checked<Option<T>> {
        found.map(|at| self.value(&at.place, at.value, read)).transpose()
    }

    /// The values of a list that may be missing; each member that cannot be read is noted.
    pub fn list<T, E: Display>(
        &mut self,
        found: Option<At<'_, Scalars>>,
        read: impl Fn(&str) -> Result<T, E>,
    ) -> Checked<Vec<T>> {
        let Some(At { value: Scalars(scalars), place }) = found else { return Ok(Vec::new()) };
        let members = scalars.iter().enumerate();
        let values: Vec<Checked<T>> = members.map(|(i, s)| self.value(&place.item(i), s, &read)).collect();
        values.into_iter().collect()
    }

    /// Both values of a range that may be missing, the first smaller than the second.
    pub fn range<T: PartialOrd, E: Display>(
        &mut self,
        found: Option<At<'_, (Scalar, Scalar)>>,
        read: impl Fn(&str) -> Result<T, E>,
    ) -> Checked<Option<(T, T)>> {
        let Some(at) = found else { return Ok(None) };
        let (from, to) = at.value;
        let low = self.value(&at.place.item(0), from, &read);
        let high = self.value(&at.place.item(1), to, &read);
        let (low, high) = (low?, high?);
        if low < high {
            return Ok(Some((low, high)));
        }
        let message = format!("the range from {} to {} holds nothing", from.text(), to.text());
        Err(self.note(&at.place, message, "write the smaller value first"))
    }
}
