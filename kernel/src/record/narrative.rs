//! Narrative cells: Markdown with mathematics as HTML.
//!
//! Markdown is CommonMark with tables, strikethrough, task lists and mathematics between dollar signs,
//! as notebook clients read it. Mathematics becomes MathML, which browsers draw without help. Pictures
//! from files and attachments become part of the page; what lies on the network is named and not
//! fetched.

use std::panic::catch_unwind;
use std::path::Path;

use base64::Engine as _;
use base64::engine::general_purpose::STANDARD;
use pulldown_cmark::{CowStr, Event, HeadingLevel, Options, Parser, Tag, TagEnd};
use serde_json::Value;

use super::evidence::{digest, joined};
use super::markup::escaped;
use super::sanitise::{HEADING, Source, clean};

/// One transparent dot.
const NOTHING: &str =
    "data:image/gif;base64,R0lGODlhAQABAIAAAAAAAP///yH5BAEAAAAALAAAAAABAAEAAAIBRAA7";

/// Larger pictures are named and left out.
const MOST_PICTURE: u64 = 8 << 20;

/// A heading of the page.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Heading {
    /// From 2, since the page's title is the one of level 1.
    pub level: u8,
    /// Its mark on the page.
    pub id: String,
    /// Its text.
    pub text: String,
}

/// A picture that the text took from a file.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct PictureFile {
    /// Its path as the text gives it.
    pub path: String,
    /// Its size.
    pub bytes: u64,
    /// The SHA-256 digest of its bytes.
    pub sha256: String,
}

/// Writes the narrative cells of one page, one after the other.
#[derive(Debug)]
pub struct Narrative<'a> {
    /// Where relative paths start.
    folder: &'a Path,
    /// The title of the page: a first heading that says the same is left out.
    title: &'a str,
    /// By how much headings go down: none if the title is the only one of level 1.
    shift: u8,
    /// The headings so far.
    pub headings: Vec<Heading>,
    /// The pictures so far.
    pub pictures: Vec<PictureFile>,
}

impl<'a> Narrative<'a> {
    /// For a notebook in a folder.
    pub fn new(folder: &'a Path, title: &'a str, shift: u8) -> Self {
        Self { folder, title, shift, headings: Vec::new(), pictures: Vec::new() }
    }

    /// One cell as HTML.
    pub fn html(&mut self, markdown: &str, attachments: Option<&Value>) -> String {
        let mut events: Vec<Event<'_>> = Vec::new();
        let mut parser = Parser::new_ext(markdown, options()).peekable();
        while let Some(event) = parser.next() {
            match event {
                Event::Start(Tag::Heading { level, .. }) => {
                    let mut inner = Vec::new();
                    for event in parser.by_ref() {
                        if matches!(event, Event::End(TagEnd::Heading(_))) {
                            break;
                        }
                        inner.push(event);
                    }
                    self.heading(level, inner, attachments, &mut events);
                }
                other => self.event(other, attachments, &mut events),
            }
        }
        let mut html = String::new();
        pulldown_cmark::html::push_html(&mut html, events.into_iter());
        clean(&html, Source::Narrative)
    }

    fn heading<'e>(
        &mut self,
        level: HeadingLevel,
        inner: Vec<Event<'e>>,
        attachments: Option<&Value>,
        events: &mut Vec<Event<'e>>,
    ) {
        let text = plain(&inner);
        if self.headings.is_empty() && level == HeadingLevel::H1 && text.trim() == self.title.trim()
        {
            return;
        }
        // No level is left out on the way down, so that the outline can be read aloud.
        let deepest = self.headings.last().map_or(2, |last| last.level + 1);
        let level = (level as u8 + self.shift).clamp(2, deepest.min(6));
        let id = format!("{HEADING}{}", self.headings.len() + 1);
        events.push(Event::InlineHtml(format!("<h{level} id=\"{id}\">").into()));
        for event in inner {
            self.event(event, attachments, events);
        }
        events.push(Event::InlineHtml(format!("</h{level}>\n").into()));
        self.headings.push(Heading { level, id, text });
    }

    fn event<'e>(
        &mut self,
        event: Event<'e>,
        attachments: Option<&Value>,
        events: &mut Vec<Event<'e>>,
    ) {
        match event {
            Event::InlineMath(tex) => {
                events.push(Event::InlineHtml(mathematics(&tex, false).into()))
            }
            Event::DisplayMath(tex) => {
                events.push(Event::InlineHtml(mathematics(&tex, true).into()))
            }
            Event::Start(Tag::Image { link_type, dest_url, title, id }) => {
                match self.picture(&dest_url, attachments) {
                    Ok(data) => {
                        let dest_url = CowStr::from(data);
                        events.push(Event::Start(Tag::Image { link_type, dest_url, title, id }));
                    }
                    Err(words) => {
                        let words = format!("<em>[{}]</em>", escaped(&words));
                        events.push(Event::InlineHtml(words.into()));
                        // A picture of nothing still carries the description that follows.
                        let dest_url = CowStr::from(NOTHING);
                        events.push(Event::Start(Tag::Image { link_type, dest_url, title, id }));
                    }
                }
            }
            other => events.push(other),
        }
    }

    /// A picture as an address that holds all of it, or why there is none.
    fn picture(&mut self, address: &str, attachments: Option<&Value>) -> Result<String, String> {
        if address.starts_with("data:image/") {
            return Ok(address.to_owned());
        }
        let decoded = percent_decoded(address);
        if let Some(name) = decoded.strip_prefix("attachment:") {
            let forms = attachments.and_then(|all| all.get(name)?.as_object());
            let form =
                forms.and_then(|forms| forms.iter().find(|(mime, _)| mime.starts_with("image/")));
            return match form {
                Some((mime, content)) => {
                    let content: String = joined(content).split_whitespace().collect();
                    Ok(format!("data:{mime};base64,{content}"))
                }
                None => Err(format!("picture not found in the cell: {name}")),
            };
        }
        if address.contains("://") || address.starts_with("//") {
            return Err(format!("picture on the network, not part of this record: {address}"));
        }
        let path = self.folder.join(&decoded);
        let Some(mime) = picture_type(&path) else {
            return Err(format!("not a kind of picture that a page can show: {decoded}"));
        };
        match std::fs::metadata(&path) {
            Err(error) => return Err(format!("picture not found: {decoded} ({error})")),
            Ok(found) if found.len() > MOST_PICTURE => {
                return Err(format!("picture too large for a record: {decoded}"));
            }
            Ok(_) => {}
        }
        let bytes = std::fs::read(&path)
            .map_err(|error| format!("picture cannot be read: {decoded} ({error})"))?;
        self.pictures.push(PictureFile {
            path: decoded,
            bytes: bytes.len() as u64,
            sha256: digest(&bytes),
        });
        Ok(format!("data:{mime};base64,{}", STANDARD.encode(bytes)))
    }
}

fn options() -> Options {
    Options::ENABLE_TABLES
        | Options::ENABLE_STRIKETHROUGH
        | Options::ENABLE_TASKLISTS
        | Options::ENABLE_MATH
}

/// The headings of level 1 in a Markdown text.
pub fn titles(markdown: &str) -> Vec<String> {
    let mut titles = Vec::new();
    let mut inner: Option<Vec<Event<'_>>> = None;
    for event in Parser::new_ext(markdown, options()) {
        match event {
            Event::Start(Tag::Heading { level: HeadingLevel::H1, .. }) => inner = Some(Vec::new()),
            Event::End(TagEnd::Heading(HeadingLevel::H1)) => {
                titles.extend(inner.take().map(|inner| plain(&inner)));
            }
            other => {
                if let Some(inner) = &mut inner {
                    inner.push(other);
                }
            }
        }
    }
    titles.retain(|title| !title.trim().is_empty());
    titles
}

fn plain(events: &[Event<'_>]) -> String {
    let mut text = String::new();
    for event in events {
        match event {
            Event::Text(part) | Event::Code(part) | Event::InlineMath(part) => text.push_str(part),
            Event::SoftBreak | Event::HardBreak => text.push(' '),
            _ => {}
        }
    }
    text
}

/// Markdown that an exhibit gives as its form.
pub fn shown_markdown(markdown: &str) -> String {
    let mut html = String::new();
    pulldown_cmark::html::push_html(&mut html, Parser::new_ext(markdown, options()));
    clean(&html, Source::Exhibit)
}

/// TeX as MathML; as itself where it is no mathematics that can be read.
pub fn mathematics(tex: &str, display: bool) -> String {
    use pulldown_latex::config::{DisplayMode, RenderConfig};
    use pulldown_latex::{Parser, Storage, push_mathml};
    let as_it_is = || format!("<code>{}</code>", escaped(tex));
    // The converter is young; a fault in it must not cost the record.
    let drawn = catch_unwind(|| {
        let storage = Storage::new();
        let events: Vec<_> = Parser::new(tex, &storage).collect::<Result<_, _>>().ok()?;
        let mut out = String::new();
        let display_mode = if display { DisplayMode::Block } else { DisplayMode::Inline };
        let config = RenderConfig { display_mode, ..RenderConfig::default() };
        let events = events.into_iter().map(Ok::<_, std::io::Error>);
        push_mathml(&mut out, events, config).ok()?;
        Some(out)
    });
    drawn.ok().flatten().unwrap_or_else(as_it_is)
}

fn picture_type(path: &Path) -> Option<&'static str> {
    let ending = path.extension()?.to_str()?.to_ascii_lowercase();
    Some(match ending.as_str() {
        "png" => "image/png",
        "jpg" | "jpeg" => "image/jpeg",
        "gif" => "image/gif",
        "svg" => "image/svg+xml",
        "webp" => "image/webp",
        _ => return None,
    })
}

fn percent_decoded(address: &str) -> String {
    let bytes = address.as_bytes();
    let mut out = Vec::with_capacity(bytes.len());
    let mut at = 0;
    while at < bytes.len() {
        let hex = |i: usize| bytes.get(i).and_then(|b| char::from(*b).to_digit(16));
        match (bytes[at], hex(at + 1), hex(at + 2)) {
            (b'%', Some(high), Some(low)) => {
                out.push(u8::try_from(high * 16 + low).unwrap_or(b'?'));
                at += 3;
            }
            (byte, ..) => {
                out.push(byte);
                at += 1;
            }
        }
    }
    String::from_utf8_lossy(&out).into_owned()
}

#[cfg(test)]
mod tests {
    use super::*;
    use serde_json::json;

    fn html(markdown: &str) -> String {
        Narrative::new(Path::new("."), "Title", 1).html(markdown, None)
    }

    #[test]
    fn the_outline_has_one_title_and_leaves_no_level_out() {
        let mut narrative = Narrative::new(Path::new("."), "Clay tiles", 1);
        let first = narrative.html("# Clay tiles\n\ntext\n\n### Deep\n\n# Again\n\n## Next", None);
        assert_eq!(
            first,
            "<p>text</p>\n<h2 id=\"s-1\">Deep</h2>\n<h2 id=\"s-2\">Again</h2>\n<h3 id=\"s-3\">Next</h3>\n"
        );
        narrative.html("## `code` and $x$", None);
        assert_eq!(narrative.headings[3].text, "code and x");
        assert_eq!(narrative.headings[3].level, 3);
    }

    #[test]
    fn mathematics_is_drawn_or_shown_as_it_is() {
        let inline = html("The variance $\\sigma^2 = \\frac{1}{n}$.");
        assert!(inline.contains("<math") && inline.contains("<mfrac>"), "{inline}");
        assert!(inline.contains("<msup>"), "{inline}");
        let spaced = html("$a \\quad b$");
        assert!(spaced.contains("</mspace>") && !spaced.contains("</mi></mspace>"), "{spaced}");
        assert!(html("$$\\sum_i x_i$$").contains("display=\"block\""));
        assert!(html("$\\nosuchthing$ costs").contains("<code>\\nosuchthing</code>"));
        assert_eq!(html("5$ and 6$"), "<p>5$ and 6$</p>\n");
    }

    #[test]
    fn html_in_the_text_is_made_safe() {
        assert_eq!(html("a <b>c</b> <script>x()</script>"), "<p>a <b>c</b> </p>\n");
        assert_eq!(html("</main><h1>x</h1>"), "<div>x</div>");
        assert!(html("[x](javascript:y)").contains("<a>x</a>"));
        assert!(html("- [x] done").contains("done"));
    }

    #[test]
    fn pictures_become_part_of_the_page_or_are_named() {
        let folder = tempfile::tempdir().unwrap();
        std::fs::write(folder.path().join("a b.png"), [1, 2, 3]).unwrap();
        let mut narrative = Narrative::new(folder.path(), "T", 0);
        let shown = narrative.html("![kiln](a%20b.png) ![two](<a b.png>)", None);
        assert_eq!(shown.matches("src=\"data:image/png;base64,AQID\"").count(), 2, "{shown}");
        assert_eq!(narrative.pictures[0].path, "a b.png");
        let attached = json!({"p.png": {"image/png": "QUJD\n"}});
        let shown = narrative.html("![k](attachment:p.png)", Some(&attached));
        assert!(shown.contains("src=\"data:image/png;base64,QUJD\""), "{shown}");
        let shown = narrative.html("![k](https://example.org/x.png) ![m](none.png)", None);
        assert!(shown.contains("on the network") && shown.contains("picture not found: none.png"));
        assert!(!shown.contains("src=\"http"));
    }
}
