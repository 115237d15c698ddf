//! Values as they were written, and where.

use ron::value::RawValue;
use serde::de::{Deserialize, Deserializer, Error};

use crate::text::Fault;

/// A value with the flag that gave it; values without a flag come from the job file.
#[derive(Clone, Debug, PartialEq)]
pub struct Given<T = Scalar> {
    /// The value.
    pub value: T,
    /// The flag, such as `--q`.
    pub flag: Option<&'static str>,
}

impl<T> Given<T> {
    /// A value that a flag of the command line gives.
    pub fn flag(flag: &'static str, value: impl Into<T>) -> Given<T> {
        Given { value: value.into(), flag: Some(flag) }
    }
}

impl Given<(Scalar, Scalar)> {
    /// A range that a flag gives as `FROM..TO`.
    ///
    /// # Errors
    /// A text that is not two values with `..` between them.
    pub fn range(flag: &'static str, text: &str) -> Result<Self, Fault> {
        match text.split_once("..").map(|(from, to)| (from.trim(), to.trim())) {
            Some((from, to)) if !from.is_empty() && !to.is_empty() => Ok(Given::flag(flag, (from.into(), to.into()))),
            _ => Err(Fault::at(flag, format!("`{text}` is no range")).help("write FROM..TO, such as 1k..100k")),
        }
    }
}

impl<'de, T: Deserialize<'de>> Deserialize<'de> for Given<T> {
    fn deserialize<D: Deserializer<'de>>(deserializer: D) -> Result<Self, D::Error> {
        Ok(Given { value: T::deserialize(deserializer)?, flag: None })
    }
}

/// A number, a text in quotes or a bare word: its text, without the quotes.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Scalar(String);

impl Scalar {
    /// The text.
    pub fn text(&self) -> &str {
        &self.0
    }

    fn from_ron(text: &str) -> Result<Scalar, String> {
        match text.chars().next() {
            Some('(' | '[' | '{') => Err("expected a number or a text in quotes".to_string()),
            _ if text.contains('"') => ron::from_str(text).map(Scalar).map_err(|e| e.code.to_string()),
            _ => Ok(text.into()),
        }
    }
}

impl From<&str> for Scalar {
    fn from(text: &str) -> Scalar {
        Scalar(text.to_string())
    }
}

impl<'de> Deserialize<'de> for Scalar {
    fn deserialize<D: Deserializer<'de>>(deserializer: D) -> Result<Self, D::Error> {
        Scalar::from_ron(Box::<RawValue>::deserialize(deserializer)?.trim().get_ron()).map_err(D::Error::custom)
    }
}

/// One scalar, or a list of them in brackets.
#[derive(Clone, Debug, Default, PartialEq, Eq)]
pub struct Scalars(pub Vec<Scalar>);

impl<'de> Deserialize<'de> for Scalars {
    fn deserialize<D: Deserializer<'de>>(deserializer: D) -> Result<Self, D::Error> {
        let raw = Box::<RawValue>::deserialize(deserializer)?;
        let text = raw.trim().get_ron();
        let scalars = if text.starts_with('[') {
            ron::from_str(text).map_err(|e| e.code.to_string())
        } else {
            Scalar::from_ron(text).map(|scalar| vec![scalar])
        };
        scalars.map(Scalars).map_err(D::Error::custom)
    }
}
