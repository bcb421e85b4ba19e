//! Running text for the terminal, broken at blanks.
//!
//! Apart, because it is pure text and can be tested as such. No word is ever cut: one that is
//! longer than a line (a digest, a path) stands on a line of its own.

use super::table::WIDTH;

/// `text` after `head`, in lines of at most 80 letters; all but the first are indented by `indent`
/// blanks.
pub fn wrapped(head: &str, text: &str, indent: usize) -> String {
    let mut lines = vec![head.to_string()];
    // nothing but the head, or blanks, stands on the line so far
    let mut fresh = true;
    for word in text.split(' ') {
        let Some(line) = lines.last_mut() else { break };
        let blank = usize::from(!fresh);
        if !fresh && line.chars().count() + blank + word.chars().count() > WIDTH {
            lines.push(format!("{}{word}", " ".repeat(indent)));
        } else {
            line.push_str(&" ".repeat(blank));
            line.push_str(word);
        }
        fresh = false;
    }
    lines.join("\n")
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn lines_end_at_blanks_and_go_on_under_the_text() {
        let text = "word ".repeat(30);
        let shown = wrapped("head  ", text.trim_end(), 6);
        let lines: Vec<&str> = shown.lines().collect();
        // 6 letters of head and 14 words of 5 letters but for the last blank: 75; a word more is 80
        assert_eq!(lines[0].len(), 80, "{shown}");
        assert!(lines[1].starts_with("      word") && lines.len() == 2, "{shown}");
        assert_eq!(shown.matches("word").count(), 30);
    }

    #[test]
    fn a_long_word_stays_whole() {
        let digest = "0".repeat(90);
        assert_eq!(wrapped("", &format!("a {digest} b"), 2), format!("a\n  {digest}\n  b"));
        assert_eq!(wrapped("  ", "one", 2), "  one");
        assert_eq!(wrapped("head ", "", 2), "head ");
    }
}
