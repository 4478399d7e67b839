//! Words from files made harmless for a terminal: a name in a run folder must not move the cursor, change the title or
//! turn the reading direction (ECMA-48 control functions; Unicode Bidirectional Algorithm, UAX #9).

/// Longest text that is printed of one name or warning, letters.
const LONGEST: usize = 2000;

/// The text with line breaks kept and every other control letter and mark of direction spelled out.
pub(super) fn words(text: &str) -> String {
    text.lines().map(|line| spelled(line, false)).collect::<Vec<_>>().join("\n")
}

/// The same, colours kept: for messages that were coloured here.
pub(super) fn coloured(text: &str) -> String {
    text.lines().map(|line| spelled(line, true)).collect::<Vec<_>>().join("\n")
}

fn spelled(line: &str, colours: bool) -> String {
    let mut out = String::with_capacity(line.len());
    let mut rest = line;
    let mut letters = 0;
    while let Some(letter) = rest.chars().next() {
        if let Some(length) = colour(rest).filter(|_| colours) {
            out.push_str(&rest[..length]);
            rest = &rest[length..];
            continue;
        }
        letters += 1;
        if letters > LONGEST {
            out.push('…');
            break;
        }
        if letter == '\t' || !(letter.is_control() || turns(letter)) {
            out.push(letter);
        } else {
            out.extend(letter.escape_unicode());
        }
        rest = &rest[letter.len_utf8()..];
    }
    out
}

/// Length of the colour sequence (SGR: escape, `[`, digits and `;`, `m`) that the text starts with.
fn colour(text: &str) -> Option<usize> {
    let body = text.strip_prefix("\u{1b}[")?;
    let end = body.find(|c: char| !(c.is_ascii_digit() || c == ';'))?;
    body[end..].starts_with('m').then_some(end + 3)
}

/// Whether a letter changes the direction in which others are read.
fn turns(letter: char) -> bool {
    matches!(letter, '\u{61c}' | '\u{200e}' | '\u{200f}' | '\u{202a}'..='\u{202e}' | '\u{2066}'..='\u{2069}')
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn escapes_and_turns_are_spelled_out() {
        assert_eq!(words("a\u{1b}[2Jb\u{202e}c\nd\te"), "a\\u{1b}[2Jb\\u{202e}c\nd\te");
        assert_eq!(words("\u{7}\u{9b}µ−5"), "\\u{7}\\u{9b}µ−5");
        assert_eq!(
            coloured("\u{1b}[31;1mred\u{1b}[0m \u{1b}]0;title\u{7}"),
            "\u{1b}[31;1mred\u{1b}[0m \\u{1b}]0;title\\u{7}"
        );
        assert_eq!(coloured("\u{1b}[31"), "\\u{1b}[31");
    }

    #[test]
    fn a_very_long_line_is_cut() {
        assert_eq!(words(&"x".repeat(5000)).chars().count(), LONGEST + 1);
    }
}
