//! Lines of a page.

/// The width of the page.
pub(super) const WIDTH: usize = 80;

/// The page under construction.
pub(super) struct Lines(pub(super) String);

impl Lines {
    pub(super) fn line(&mut self, text: impl AsRef<str>) {
        self.0.push_str(text.as_ref().trim_end());
        self.0.push('\n');
    }

    pub(super) fn blank(&mut self) {
        self.0.push('\n');
    }

    pub(super) fn title(&mut self, text: &str) {
        self.blank();
        let rest = WIDTH.saturating_sub(text.chars().count() + 1);
        self.line(format!("{text} {}", "-".repeat(rest)));
    }

    /// Words behind a fixed start, broken to the width of the page and kept to the right of it.
    pub(super) fn hanging(&mut self, start: &str, text: &str) {
        let column = start.chars().count();
        let mut lead = start.to_string();
        for line in words_in(text, WIDTH.saturating_sub(column)) {
            self.line(format!("{lead}{line}"));
            lead = " ".repeat(column);
        }
        if !lead.trim().is_empty() {
            self.line(lead);
        }
    }

    /// Words broken to the width of the page, each line after the first begun with `indent`.
    pub(super) fn wrapped(&mut self, text: &str, indent: &str) {
        let lead = text.len() - text.trim_start().len();
        let mut line = " ".repeat(lead);
        for word in text.split_whitespace() {
            if !line.trim().is_empty() && line.chars().count() + 1 + word.chars().count() > WIDTH {
                self.line(&line);
                line = indent.to_string();
            }
            if !line.is_empty() && !line.ends_with(' ') {
                line.push(' ');
            }
            line.push_str(word);
        }
        self.line(&line);
    }
}

/// Words in lines of at most this width.
fn words_in(text: &str, most: usize) -> Vec<String> {
    let mut lines: Vec<String> = Vec::new();
    for word in text.split_whitespace() {
        match lines.last_mut() {
            Some(line) if line.chars().count() + 1 + word.chars().count() <= most => {
                line.push(' ');
                line.push_str(word);
            }
            _ => lines.push(word.to_string()),
        }
    }
    lines
}
