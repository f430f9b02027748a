//! The text of a report: a list of loops in columns, wrapped.

use super::{DossierOutcome, LoopOutcome, LoopReport};
use crate::notice::{Problem, Severity};
use crate::record::Status;
use std::fmt::Write;

/// Width of the text, signs.
pub const WIDTH: usize = 100;

/// Width of the column that says what a line is: "warning" and two spaces.
const LABEL_WIDTH: usize = 9;

/// Width of the column of the status: "for signature" and two spaces.
const STATUS_WIDTH: usize = 15;

/// How far advice stands in from the problem it belongs to.
const HINT_INDENT: usize = 4;

/// A tag longer than this stands on a line of its own.
const LONGEST_TAG: usize = 24;

/// Text as it grows, wrapped to [`WIDTH`].
pub struct Page {
    text: String,
    tag_width: usize,
}

impl Page {
    /// An empty page whose column of tags fits these loops.
    pub fn new(loops: &[LoopReport]) -> Self {
        let longest = loops
            .iter()
            .map(|report| printable(&report.tag).chars().count())
            .filter(|length| *length <= LONGEST_TAG)
            .chain(["register".len()])
            .max();
        Page {
            text: String::new(),
            tag_width: longest.unwrap_or(0) + 2,
        }
    }

    /// What was written so far.
    pub fn text(&self) -> &str {
        &self.text
    }

    /// One empty line, none at the top.
    pub fn blank(&mut self) {
        if !self.text.is_empty() && !self.text.ends_with("\n\n") {
            self.text.push('\n');
        }
    }

    /// A paragraph that stands in by `indent`.
    pub fn line(&mut self, indent: usize, text: &str) {
        self.labelled(&" ".repeat(indent), indent, text);
    }

    /// A paragraph whose first line begins with `label` and whose others stand in by `indent`.
    pub fn labelled(&mut self, label: &str, indent: usize, text: &str) {
        let mut lead = label.to_owned();
        for part in text.split('\n') {
            // An entry of a list keeps its own further indent.
            let indent = indent + if part.starts_with("- ") { 2 } else { 0 };
            let mut line = lead;
            let mut bare = true;
            for word in part.split(' ') {
                let word = printable(word);
                let fits = line.chars().count() + 1 + word.chars().count() <= WIDTH;
                if !bare && !fits {
                    self.push(&line);
                    line = " ".repeat(indent);
                    bare = true;
                }
                if !bare {
                    line.push(' ');
                }
                line.push_str(&word);
                bare = false;
            }
            self.push(&line);
            lead = " ".repeat(indent.min(label.chars().count()));
        }
    }

    fn push(&mut self, line: &str) {
        let _ = writeln!(self.text, "{}", line.trim_end());
    }

    /// A line of the list of loops: tag, status, file.
    pub fn row(&mut self, tag: &str, status: &str, rest: &str) {
        let mut tag = printable(tag);
        if tag.chars().count() > LONGEST_TAG {
            self.line(0, &tag);
            tag.clear();
        }
        let label = format!("{tag:<0$}{status:<STATUS_WIDTH$}", self.tag_width);
        let indent = label.chars().count();
        self.labelled(&label, indent, rest);
    }

    /// Problems with their advice.
    pub fn problems(&mut self, indent: usize, problems: &[Problem]) {
        for problem in problems {
            let name = match problem.severity {
                Severity::Error => "error",
                Severity::Warning => "warning",
            };
            let what = match &problem.place {
                Some(place) => format!("{place}: {}", problem.message),
                None => problem.message.clone(),
            };
            self.entry(indent, name, &what);
            if let Some(hint) = &problem.hint {
                self.line(indent + LABEL_WIDTH + HINT_INDENT, hint);
            }
        }
    }

    fn entry(&mut self, indent: usize, name: &str, what: &str) {
        let label = format!("{:indent$}{name:<LABEL_WIDTH$}", "");
        self.labelled(&label, indent + LABEL_WIDTH, what);
    }

    /// Every loop after an empty line.
    pub fn loops(&mut self, loops: &[LoopReport]) {
        self.blank();
        for report in loops {
            self.one_loop(report);
        }
    }

    /// One loop with all there is to say of it.
    pub fn one_loop(&mut self, report: &LoopReport) {
        let indent = self.tag_width;
        match &report.outcome {
            LoopOutcome::Ready {
                status,
                open_items,
                next_time,
            } => {
                self.row(&report.tag, in_words(*status), "");
                self.entries(indent, "open", open_items);
                self.entries(indent, "advice", next_time);
            }
            LoopOutcome::Written {
                status,
                open_items,
                next_time,
                pdf,
                kept,
                ..
            } => {
                self.row(&report.tag, in_words(*status), &file(pdf, *kept));
                self.entries(indent, "open", open_items);
                self.entries(indent, "advice", next_time);
            }
            LoopOutcome::Planned { pdf, summary, .. } => {
                self.row(&report.tag, "planned", pdf);
                self.line(indent, summary);
            }
            LoopOutcome::Failed { problems } => {
                self.row(&report.tag, "failed", "");
                self.problems(indent, problems);
            }
        }
        self.problems(indent, &report.notices);
    }

    fn entries(&mut self, indent: usize, name: &str, sentences: &[String]) {
        for sentence in sentences {
            self.entry(indent, name, sentence);
        }
    }

    /// The dossier.
    pub fn dossier(&mut self, dossier: &DossierOutcome) {
        match dossier {
            DossierOutcome::Written {
                status,
                pdf,
                kept,
                notices,
                ..
            } => {
                self.row("dossier", in_words(*status), &file(pdf, *kept));
                self.problems(self.tag_width, notices);
            }
            DossierOutcome::Failed { problems } => {
                self.row("dossier", "failed", "");
                self.problems(self.tag_width, problems);
            }
        }
    }
}

fn file(pdf: &str, kept: bool) -> String {
    if kept {
        format!("{pdf} (issued before)")
    } else {
        pdf.to_owned()
    }
}

fn in_words(status: Status) -> &'static str {
    match status {
        Status::Draft => "draft",
        Status::ForSignature => "for signature",
        Status::Withheld => "withheld",
    }
}

/// A word with its control signs shown, so that no cell of a log steers the terminal.
fn printable(word: &str) -> String {
    word.chars()
        .flat_map(|sign| {
            let escaped = sign.is_control().then(|| sign.escape_default());
            let plain = (!sign.is_control()).then_some(sign);
            escaped.into_iter().flatten().chain(plain)
        })
        .collect()
}
