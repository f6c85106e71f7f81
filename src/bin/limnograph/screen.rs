//! What we write on: how wide, how long, which characters, which emphasis.

use std::io::IsTerminal;

/// Beyond this a line is no easier to read.
const WIDEST: usize = 160;
const NARROWEST: usize = 60;

/// A terminal or what stands for it.
#[derive(Clone, Debug)]
pub struct Screen {
    /// Characters in a line.
    pub width: usize,
    /// Lines; `None` when there is no limit.
    pub lines: Option<usize>,
    /// ASCII only.
    pub is_ascii: bool,
    /// May text be set in bold?
    pub has_emphasis: bool,
}

impl Screen {
    /// That of standard output.
    pub fn of_terminal(is_ascii: bool, is_endless: bool) -> Screen {
        let is_terminal = std::io::stdout().is_terminal();
        let terminal = terminal_size::terminal_size().filter(|_| is_terminal);
        let (width, lines) = match terminal {
            Some((width, height)) => (usize::from(width.0), usize::from(height.0)),
            None => (
                number("COLUMNS").unwrap_or(80),
                number("LINES").unwrap_or(24),
            ),
        };
        let is_plain = std::env::var_os("NO_COLOR").is_some_and(|value| !value.is_empty())
            || std::env::var_os("TERM").is_some_and(|terminal| terminal == "dumb");
        Screen {
            width: width.clamp(NARROWEST, WIDEST),
            // The prompt wants a line as well.
            lines: (!is_endless).then_some(lines.max(12) - usize::from(is_terminal)),
            is_ascii: is_ascii || is_ascii_locale(),
            has_emphasis: is_terminal && !is_plain,
        }
    }

    /// The text in bold, where there is any.
    pub fn bold(&self, text: &str) -> String {
        if self.has_emphasis {
            format!("\x1b[1m{text}\x1b[0m")
        } else {
            text.to_string()
        }
    }

    /// The text less conspicuous, where that is possible.
    pub fn faint(&self, text: &str) -> String {
        if self.has_emphasis {
            format!("\x1b[2m{text}\x1b[0m")
        } else {
            text.to_string()
        }
    }

    /// The text, cut to `width` characters if need be.
    pub fn cut(&self, text: &str, width: usize) -> String {
        let text = if self.is_ascii {
            to_ascii(text)
        } else {
            text.to_string()
        };
        if text.chars().count() <= width {
            return text;
        }
        let end = if self.is_ascii { "..." } else { "…" };
        let kept = width.saturating_sub(end.chars().count());
        text.chars()
            .take(kept)
            .chain(end.chars().take(width))
            .collect()
    }

    /// The text on as many lines as it needs, broken between words; the first begins after `indent` spaces, the
    /// others two further in.
    pub fn wrap(&self, text: &str, indent: usize) -> Vec<String> {
        let text = if self.is_ascii {
            to_ascii(text)
        } else {
            text.to_string()
        };
        let first = " ".repeat(indent);
        let further = " ".repeat(indent + 2);
        let mut lines = Vec::new();
        let mut line = first;
        let mut used = indent;
        let mut is_begun = false;
        // Blanks within a text are kept: they set things apart.
        for word in text.split_inclusive(' ') {
            let bare = word.trim_end().chars().count();
            if is_begun && used + bare > self.width {
                lines.push(line.trim_end().to_string());
                line = further.clone();
                used = indent + 2;
                is_begun = false;
            }
            if !is_begun && word == " " && !lines.is_empty() {
                continue;
            }
            // A word longer than a line, such as a path, is broken anywhere.
            for character in word.chars() {
                if used >= self.width {
                    if character == ' ' {
                        continue;
                    }
                    lines.push(line.trim_end().to_string());
                    line = further.clone();
                    used = indent + 2;
                }
                line.push(character);
                used += 1;
            }
            is_begun = true;
        }
        lines.push(line.trim_end().to_string());
        lines
    }

    /// `left` and `right` at the two ends of a line.
    pub fn ends(&self, left: &str, right: &str) -> String {
        let right = self.cut(right, self.width / 2);
        let room = self.width.saturating_sub(right.chars().count() + 1);
        let left = self.cut(left, room);
        format!("{left:<room$} {right}")
    }
}

fn number(variable: &str) -> Option<usize> {
    std::env::var(variable)
        .ok()?
        .parse()
        .ok()
        .filter(|&number| number > 0)
}

fn is_ascii_locale() -> bool {
    let given = ["LC_ALL", "LC_CTYPE", "LANG"]
        .into_iter()
        .filter_map(|name| std::env::var(name).ok());
    given
        .into_iter()
        .find(|value| !value.is_empty())
        .is_some_and(|value| value == "C" || value == "POSIX")
}

fn to_ascii(text: &str) -> String {
    text.chars()
        .map(|character| if character.is_ascii() { character } else { '?' })
        .collect()
}

/// The text without control characters: what stands in a series must not steer a terminal.
pub fn harmless(text: &str) -> String {
    text.chars()
        .map(|character| {
            if character.is_control() {
                ' '
            } else {
                character
            }
        })
        .collect()
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_long_text_is_broken_between_words_and_keeps_all_of_them() {
        let screen = Screen {
            width: 12,
            lines: None,
            is_ascii: false,
            has_emphasis: false,
        };
        assert_eq!(screen.wrap("low water", 1), [" low water"]);
        assert_eq!(
            screen.wrap("low water at the saltmarsh-station", 1),
            [" low water", "   at the", "   saltmarsh", "   -station"]
        );
        assert_eq!(screen.wrap("a   b", 0), ["a   b"]);
    }
}
