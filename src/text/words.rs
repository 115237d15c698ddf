//! Words in a line: breaking, articles, signs that are not shown.

/// The text broken between words into lines, the first of at most `first` characters, the others of at most `room`.
///
/// A word that is longer than a line stays whole; unbroken blanks (U+00A0) become plain ones. A first line that has less
/// room than the others may stay empty.
pub fn wrapped(text: &str, first: usize, room: usize) -> Vec<String> {
    let mut lines = vec![String::new()];
    let mut used = 0;
    for word in text.split(' ').filter(|word| !word.is_empty()) {
        let length = word.chars().count();
        let space = if lines.len() == 1 { first } else { room };
        if used + usize::from(used > 0) + length > space && (used > 0 || space < room) {
            lines.push(String::new());
            used = 0;
        }
        if let Some(line) = lines.last_mut() {
            if used > 0 {
                line.push(' ');
                used += 1;
            }
            line.push_str(&word.replace('\u{a0}', " "));
            used += length;
        }
    }
    lines
}

/// A name with its indefinite article, such as `an all-pass`.
pub fn with_article(name: &str) -> String {
    let article = if name.starts_with(['a', 'e', 'i', 'o', 'u']) { "an" } else { "a" };
    format!("{article} {name}")
}

/// What is wrong with a text that is shown, if it has a sign that steers a terminal in place of being shown.
pub fn control_character(text: &str) -> Option<String> {
    let sign = text.chars().find(|c| c.is_control())?;
    Some(format!("the control character {} cannot be shown", sign.escape_unicode()))
}

/// What to do about a [`control_character`].
pub const CONTROL_HELP: &str = "leave out line breaks, tabs and other control characters";

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn lines_are_filled() {
        assert_eq!(wrapped("aa bb cc", 5, 5), ["aa bb", "cc"]);
        assert_eq!(wrapped("aaaaaaa b", 5, 5), ["aaaaaaa", "b"]);
        assert_eq!(wrapped("aa bb cc", 1, 5), ["", "aa bb", "cc"]);
        assert_eq!(wrapped("aa 1\u{a0}k", 4, 4), ["aa", "1 k"]);
        assert_eq!(wrapped("", 5, 5), [""]);
    }

    #[test]
    fn articles_follow_the_first_letter() {
        assert_eq!([with_article("all-pass"), with_article("notch")], ["an all-pass", "a notch"]);
    }

    #[test]
    fn control_characters_are_named_and_not_repeated() {
        assert_eq!(control_character("µ Ω \u{2019}"), None);
        for text in ["a\nb", "\u{1b}[31m", "\t", "\u{7f}", "\u{9b}1m"] {
            assert!(control_character(text).is_some_and(|message| !message.contains(char::is_control)), "{text:?}");
        }
    }
}
