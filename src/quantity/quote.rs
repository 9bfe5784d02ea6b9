//! Text from outside, made safe and short enough to stand in a message.

/// Longest piece of foreign text a message repeats, in characters.
const LONGEST: usize = 48;

/// `text` in double quotes, control characters escaped, cut after 48 characters.
pub fn quoted(text: &str) -> String {
    let mut shown = String::from("\"");
    for (index, character) in text.chars().enumerate() {
        if index == LONGEST {
            shown.push('…');
            break;
        }
        push_visible(&mut shown, character);
    }
    shown.push('"');
    shown
}

/// A terminal obeys control characters and the marks that turn writing direction: they are shown as escapes.
fn push_visible(shown: &mut String, character: char) {
    let turns_direction = matches!(character, '\u{200b}'..='\u{200f}' | '\u{2028}'..='\u{202e}' | '\u{2066}'..='\u{2069}' | '\u{feff}');
    if character.is_control() || turns_direction {
        shown.extend(character.escape_unicode());
    } else {
        shown.push(character);
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn control_characters_reach_the_terminal_as_escapes() {
        assert_eq!(quoted("a\u{1b}[2Jb\n"), "\"a\\u{1b}[2Jb\\u{a}\"");
        assert_eq!(quoted("\u{202e}abc"), "\"\\u{202e}abc\"");
    }

    #[test]
    fn long_text_is_cut() {
        assert_eq!(quoted(&"x".repeat(10_000)).chars().count(), LONGEST + 3);
        assert_eq!(quoted("4k7"), "\"4k7\"");
    }
}
