//! Faults of a sheet with the line and a caret under the place.

use crate::sheet::Fault;
use annotate_snippets::{AnnotationKind, Group, Level, Renderer, Snippet};

/// All faults, as they are shown on standard error.
pub(super) fn render(name: &str, text: &str, faults: &[Fault], colour: bool) -> String {
    let renderer = if colour { Renderer::styled() } else { Renderer::plain() };
    let mut out = String::new();
    for fault in faults {
        let span = fault.span.start.min(text.len())..fault.span.end.min(text.len());
        // A place inside a character would not be accepted.
        let good = text.is_char_boundary(span.start) && text.is_char_boundary(span.end) && !text.is_empty();
        let message = printable(&fault.message);
        let mut group = Group::with_title(Level::ERROR.primary_title(message));
        if good {
            group = group
                .element(Snippet::source(text).path(name).line_start(1).annotation(AnnotationKind::Primary.span(span)));
        }
        if let Some(hint) = &fault.hint {
            group = group.element(Level::HELP.with_name("hint").message(printable(hint)));
        }
        out.push_str(&renderer.render(&[group]));
        out.push_str("\n\n");
    }
    let s = if faults.len() == 1 { "" } else { "s" };
    out.push_str(&format!("{name}: {} fault{s}; nothing was solved\n", faults.len()));
    out
}

/// Without control characters, which a sheet could smuggle into the terminal.
fn printable(text: &str) -> String {
    text.chars().map(|c| if c.is_control() { ' ' } else { c }).collect()
}
