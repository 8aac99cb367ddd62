//! What is wrong with a file, shown where it stands.
//!
//! Contract: a [`Problems`] is never empty. Its `Display` renders every problem
//! with file, line and caret, without colour; [`Problems::render`] with it.
//! Spans are byte ranges of the text; an empty text means the file as a whole.

use std::ops::Range;

use annotate_snippets::renderer::DecorStyle;
use annotate_snippets::{AnnotationKind, Group, Level, Renderer, Snippet};

/// One thing that is wrong.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Problem {
    /// Where it stands, in bytes of the text.
    pub span: Range<usize>,
    /// What happened, in one sentence.
    pub title: String,
    /// What was found, written beside the caret; may be empty.
    pub found: String,
    /// What would be right; may be empty.
    pub right: String,
    /// Another place that belongs to it, with its label.
    pub see: Option<(Range<usize>, String)>,
}

impl Problem {
    /// A problem at a place.
    pub fn new(span: Range<usize>, title: impl Into<String>) -> Self {
        Self { span, title: title.into(), found: String::new(), right: String::new(), see: None }
    }

    /// Say what was found.
    #[must_use]
    pub fn found(mut self, found: impl Into<String>) -> Self {
        self.found = found.into();
        self
    }

    /// Say what would be right.
    #[must_use]
    pub fn right(mut self, right: impl Into<String>) -> Self {
        self.right = right.into();
        self
    }

    /// Point at another place that belongs to it.
    #[must_use]
    pub fn see(mut self, span: Range<usize>, label: impl Into<String>) -> Self {
        self.see = Some((span, label.into()));
        self
    }
}

/// Everything that is wrong with one file.
#[derive(Clone, Debug, PartialEq, Eq, thiserror::Error)]
#[error("{}", self.render(false))]
pub struct Problems {
    file: String,
    text: String,
    list: Vec<Problem>,
}

impl Problems {
    /// Problems of a text, in the order of their places.
    pub fn of_text(file: &str, text: &str, mut list: Vec<Problem>) -> Self {
        list.sort_by_key(|problem| problem.span.start);
        Self { file: file.to_owned(), text: text.to_owned(), list }
    }

    /// A problem with a file whose text is not at hand.
    pub fn without_text(file: &str, problem: Problem) -> Self {
        Self::of_text(file, "", vec![problem])
    }

    /// Name of the file they belong to.
    pub fn file(&self) -> &str {
        &self.file
    }

    /// The problems in the order of their places.
    pub fn list(&self) -> &[Problem] {
        &self.list
    }

    /// Line of a problem's place, counted from 1.
    pub fn line_of(&self, problem: &Problem) -> usize {
        let end = problem.span.start.min(self.text.len());
        1 + self.text.as_bytes()[..end].iter().filter(|&&byte| byte == b'\n').count()
    }

    /// All problems as text for a terminal.
    pub fn render(&self, colour: bool) -> String {
        let renderer = if colour { Renderer::styled() } else { Renderer::plain() }
            .decor_style(DecorStyle::Ascii);
        let mut out = String::new();
        for problem in &self.list {
            out.push_str(&renderer.render(&[self.group(problem)]));
            out.push_str("\n\n");
        }
        out.push_str(&self.tally());
        out
    }

    /// The sentence that closes the listing.
    fn tally(&self) -> String {
        match self.list.len() {
            1 => format!("1 problem in {}", self.file),
            count => format!("{count} problems in {}", self.file),
        }
    }

    /// One problem in the renderer's terms.
    fn group<'a>(&'a self, problem: &'a Problem) -> Group<'a> {
        let mut group = Group::with_title(Level::ERROR.primary_title(problem.title.as_str()));
        if !self.text.is_empty() {
            let mut primary = AnnotationKind::Primary.span(self.inside(&problem.span));
            if !problem.found.is_empty() {
                primary = primary.label(problem.found.as_str());
            }
            let mut snippet =
                Snippet::source(self.text.as_str()).path(self.file.as_str()).annotation(primary);
            if let Some((span, label)) = &problem.see {
                let context = AnnotationKind::Context.span(self.inside(span));
                snippet = snippet.annotation(context.label(label.as_str()));
            }
            group = group.element(snippet);
        }
        if !problem.right.is_empty() {
            group = group.element(Level::HELP.message(problem.right.as_str()));
        }
        group
    }

    /// A span that lies inside the text and on character borders, whatever came in.
    fn inside(&self, span: &Range<usize>) -> Range<usize> {
        let border = |mut at: usize| {
            at = at.min(self.text.len());
            while !self.text.is_char_boundary(at) {
                at -= 1;
            }
            at
        };
        let start = border(span.start);
        start..border(span.end).max(start)
    }
}
