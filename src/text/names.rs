//! Names that were probably meant.

/// Advice for a name that does not exist: the nearest one that does, or otherwise all of them.
///
/// `list` introduces the names, such as `the keys here are`. Letter case and signs do not count, so `low_pass` is near
/// `LowPass`; nothing is suggested where fewer than two thirds of the letters agree.
pub fn suggestion<S: AsRef<str>>(name: &str, list: &str, known: &[S]) -> String {
    let known: Vec<&str> = known.iter().map(AsRef::as_ref).collect();
    match nearest(name, &known) {
        Some(near) => format!("did you mean `{near}`?"),
        None if known.is_empty() => String::new(),
        None => format!("{list} {}", known.join(", ")),
    }
}

/// The known name that was probably meant.
pub(super) fn nearest<'a>(name: &str, known: &[&'a str]) -> Option<&'a str> {
    let letters =
        |text: &str| text.chars().filter(|c| c.is_alphanumeric()).flat_map(char::to_lowercase).collect::<Vec<_>>();
    let wanted = letters(name);
    let close = known.iter().filter_map(|&candidate| {
        let found = letters(candidate);
        let edits = edits(&wanted, &found);
        (3 * edits <= wanted.len().max(found.len())).then_some((edits, candidate))
    });
    close.min_by_key(|&(edits, _)| edits).map(|(_, candidate)| candidate)
}

/// Insertions, deletions, replacements and swaps of neighbours that turn one word into the other (optimal string
/// alignment distance).
fn edits(a: &[char], b: &[char]) -> usize {
    let mut rows = vec![(0..=b.len()).collect::<Vec<_>>()];
    for i in 1..=a.len() {
        let mut row = vec![i];
        for j in 1..=b.len() {
            let replaced = rows[i - 1][j - 1] + usize::from(a[i - 1] != b[j - 1]);
            let mut least = replaced.min(rows[i - 1][j] + 1).min(row[j - 1] + 1);
            if i > 1 && j > 1 && a[i - 1] == b[j - 2] && a[i - 2] == b[j - 1] {
                least = least.min(rows[i - 2][j - 2] + 1);
            }
            row.push(least);
        }
        rows.push(row);
    }
    rows[a.len()][b.len()]
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn slips_are_forgiven_and_strangers_are_not() {
        let known = ["gain", "LowPass", "tow-thomas", "q"];
        for (slip, meant) in [
            ("gian", Some("gain")),
            ("gains", Some("gain")),
            ("low_pas", Some("LowPass")),
            ("TowThomas", Some("tow-thomas")),
            ("Q", Some("q")),
            ("x", None),
            ("", None),
            ("frequency", None),
        ] {
            assert_eq!(nearest(slip, &known), meant, "{slip}");
        }
    }

    #[test]
    fn advice_names_the_nearest_or_lists_what_exists() {
        assert_eq!(suggestion("gian", "the keys are", &["gain", "q"]), "did you mean `gain`?");
        assert_eq!(suggestion("x", "the keys are", &["gain", "q"]), "the keys are gain, q");
        assert_eq!(suggestion::<&str>("x", "the keys are", &[]), "");
    }
}
