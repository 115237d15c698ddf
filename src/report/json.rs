//! The record as JSON: a contract for scripts. SI numbers unrounded, what is not known is null.

use std::io::{self, Write};

use super::record::Record;

/// Writes the record as indented JSON with a line end. The keys are the fields of [`Record`].
///
/// # Errors
/// Those of the writer.
pub fn write_json(record: &Record, out: &mut dyn Write) -> io::Result<()> {
    serde_json::to_writer_pretty(&mut *out, record).map_err(io::Error::from)?;
    writeln!(out)
}

#[cfg(test)]
mod tests {
    #![allow(clippy::unwrap_used)]
    use serde_json::Value;

    use super::*;
    use crate::report::sample;

    fn written(record: &Record) -> String {
        let mut bytes = Vec::new();
        write_json(record, &mut bytes).unwrap();
        String::from_utf8(bytes).unwrap()
    }

    /// The paths of all keys, list members merged.
    fn paths(value: &Value, path: &str, found: &mut std::collections::BTreeSet<String>) {
        match value {
            Value::Object(map) => map.iter().for_each(|(key, inner)| {
                let path = format!("{path}.{key}");
                found.insert(path.clone());
                paths(inner, &path, found);
            }),
            Value::Array(list) => list.iter().for_each(|inner| paths(inner, &format!("{path}[]"), found)),
            _ => {}
        }
    }

    #[test]
    fn the_promised_keys_are_there() {
        let value: Value = serde_json::from_str(&written(&sample::record())).unwrap();
        let mut found = std::collections::BTreeSet::new();
        paths(&value, "", &mut found);
        for key in [
            ".format",
            ".search.proof",
            ".search.reason",
            ".search.sets",
            ".search.seconds",
            ".shortlist[].rank",
            ".shortlist[].response_error_db",
            ".shortlist[].part_numbers",
            ".shortlist[].placed_parts",
            ".shortlist[].sections[].name",
            ".shortlist[].sections[].circuit",
            ".shortlist[].sections[].output",
            ".shortlist[].sections[].achieved.f0_hz",
            ".shortlist[].sections[].achieved.q",
            ".shortlist[].sections[].achieved.gain",
            ".shortlist[].sections[].achieved.fz_hz",
            ".shortlist[].sections[].parts[].slot",
            ".shortlist[].sections[].parts[].kind",
            ".shortlist[].sections[].parts[].value",
            ".shortlist[].sections[].parts[].made_of[].value",
        ] {
            assert!(found.contains(key), "{key}");
        }
        assert_eq!(value["format"], "roundwell-shortlist/1");
        assert_eq!(value["search"]["proof"], "exhaustive");
        assert_eq!(value["search"]["reason"], Value::Null);
    }

    #[test]
    fn numbers_are_unrounded_and_the_unknown_is_null() {
        let mut record = sample::record();
        record.shortlist[0].worst_miss = None;
        let text = written(&record);
        let value: Value = serde_json::from_str(&text).unwrap();
        assert_eq!(value["shortlist"][0]["worst_miss"], Value::Null);
        let parts = &value["shortlist"][0]["sections"][0]["parts"];
        let capacitor = parts.as_array().unwrap().iter().find(|part| part["slot"] == "C1").unwrap();
        assert_eq!(capacitor["value"].as_f64(), Some(10e-9));
        assert_eq!(capacitor["made_of"][0]["value"].as_f64(), Some(10e-9));
        let error = record.shortlist[0].response_error_db;
        assert_eq!(value["shortlist"][0]["response_error_db"].as_f64(), error);
        assert_eq!(value["shortlist"][0]["sections"][0]["achieved"]["fz_hz"], Value::Null);
    }
}
