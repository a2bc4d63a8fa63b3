//! A finished picture.

use crate::ink::STYLE;

/// A picture, as SVG.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Picture {
    pub(crate) width: u32,
    pub(crate) height: u32,
    pub(crate) title: String,
    pub(crate) description: String,
    /// What is drawn, in units of 1/[`SCALE`](crate::frame::SCALE) px.
    pub(crate) drawing: String,
    pub(crate) scale: u32,
}

impl Picture {
    /// What it shows.
    pub fn title(&self) -> &str {
        &self.title
    }

    /// A file of its own: it carries its style sheet, and follows the reader's choice of light or dark.
    pub fn file(&self) -> String {
        let style = format!("<style>\n{STYLE}</style>\n");
        format!(
            "<?xml version=\"1.0\" encoding=\"UTF-8\"?>\n{}",
            self.element(&style)
        )
    }

    /// An element for a page, whose style sheet has [`STYLE`] in it.
    pub fn inline(&self) -> String {
        self.element("")
    }

    fn element(&self, style: &str) -> String {
        let Self {
            width,
            height,
            scale,
            drawing,
            ..
        } = self;
        let (title, description) = (escaped(&self.title), escaped(&self.description));
        format!(
            "<svg xmlns=\"http://www.w3.org/2000/svg\" class=\"picture\" role=\"img\" width=\"{width}\" \
             height=\"{height}\" viewBox=\"0 0 {} {}\">\n<title>{title}</title>\n\
             <desc>{description}</desc>\n{style}{drawing}</svg>\n",
            width * scale,
            height * scale,
        )
    }
}

fn escaped(text: &str) -> String {
    text.replace('&', "&amp;")
        .replace('<', "&lt;")
        .replace('>', "&gt;")
}
