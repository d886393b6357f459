//! HTML that somebody else wrote, made safe to stand in a page: known elements with known attributes,
//! every element closed, everything else taken out.
//!
//! Narrative text and exhibits of a person's own types may hold any HTML. The page forbids scripts and
//! the network to all of it (its content security policy); what is done here keeps a stray closing tag
//! from breaking the page, and keeps an exhibit from posing as evidence.

use super::markup::escaped;

/// Where the HTML comes from.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Source {
    /// Narrative: headings that carry one of the page's own marks stay headings.
    Narrative,
    /// An exhibit: headings become plain blocks, since they are no part of the page's outline.
    Exhibit,
}

/// How the identifiers of the page's own headings begin.
pub const HEADING: &str = "s-";

const ELEMENTS: [&str; 90] = [
    "a",
    "abbr",
    "b",
    "bdi",
    "bdo",
    "blockquote",
    "br",
    "caption",
    "cite",
    "code",
    "col",
    "colgroup",
    "dd",
    "del",
    "details",
    "dfn",
    "div",
    "dl",
    "dt",
    "em",
    "figcaption",
    "figure",
    "hr",
    "i",
    "img",
    "ins",
    "kbd",
    "li",
    "mark",
    "ol",
    "p",
    "pre",
    "q",
    "rp",
    "rt",
    "ruby",
    "s",
    "samp",
    "small",
    "span",
    "strong",
    "sub",
    "summary",
    "sup",
    "table",
    "tbody",
    "td",
    "tfoot",
    "th",
    "thead",
    "time",
    "tr",
    "u",
    "ul",
    "var",
    "wbr",
    "h1",
    "h2",
    "h3",
    "h4",
    "h5",
    "h6",
    "math",
    "maction",
    "merror",
    "mfrac",
    "mi",
    "mmultiscripts",
    "mn",
    "mo",
    "mover",
    "mpadded",
    "mphantom",
    "mprescripts",
    "mroot",
    "mrow",
    "ms",
    "mspace",
    "msqrt",
    "mstyle",
    "msub",
    "msubsup",
    "msup",
    "mtable",
    "mtd",
    "mtext",
    "mtr",
    "munder",
    "munderover",
    "none",
];

const VOID: [&str; 5] = ["br", "hr", "img", "col", "wbr"];

/// Elements whose content is no text of the page.
const DROPPED_WHOLE: [&str; 14] = [
    "script",
    "style",
    "title",
    "textarea",
    "iframe",
    "noscript",
    "template",
    "object",
    "svg",
    "select",
    "audio",
    "video",
    "xmp",
    "annotation",
];

const ATTRIBUTES: [&str; 40] = [
    "class",
    "title",
    "dir",
    "lang",
    "colspan",
    "rowspan",
    "scope",
    "style",
    "alt",
    "width",
    "height",
    "open",
    "start",
    "value",
    "datetime",
    "display",
    "mathvariant",
    "stretchy",
    "fence",
    "separator",
    "form",
    "lspace",
    "rspace",
    "depth",
    "displaystyle",
    "scriptlevel",
    "accent",
    "accentunder",
    "columnalign",
    "rowalign",
    "columnspan",
    "linethickness",
    "symmetric",
    "movablelimits",
    "minsize",
    "maxsize",
    "largeop",
    "voffset",
    "columnspacing",
    "rowspacing",
];

/// Makes HTML safe to stand inside an element of a page.
pub fn clean(html: &str, source: Source) -> String {
    let mut cleaner = Cleaner { out: String::with_capacity(html.len()), open: Vec::new(), source };
    let mut rest = html;
    while let Some(at) = rest.find('<') {
        cleaner.text(&rest[..at]);
        rest = cleaner.markup(&rest[at..]);
    }
    cleaner.text(rest);
    while let Some(name) = cleaner.open.pop() {
        cleaner.end(&name);
    }
    cleaner.out
}

struct Cleaner {
    out: String,
    /// Elements that are open, under the names that they were written by.
    open: Vec<String>,
    source: Source,
}

impl Cleaner {
    fn text(&mut self, text: &str) {
        // Character references stay as they are.
        self.out.push_str(&text.replace('>', "&gt;"));
    }

    fn end(&mut self, name: &str) {
        self.out.push_str("</");
        self.out.push_str(name);
        self.out.push('>');
    }

    /// Takes what begins with `<`; gives what follows it.
    fn markup<'a>(&mut self, text: &'a str) -> &'a str {
        if let Some(comment) = text.strip_prefix("<!--") {
            return comment.find("-->").map_or("", |end| &comment[end + 3..]);
        }
        if text.starts_with("<!") || text.starts_with("<?") {
            return text.find('>').map_or("", |end| &text[end + 1..]);
        }
        let closes = text.starts_with("</");
        let body = &text[1 + usize::from(closes)..];
        if !body.starts_with(|c: char| c.is_ascii_alphabetic()) {
            self.out.push_str("&lt;");
            return &text[1..];
        }
        let name_end =
            body.find(|c: char| !c.is_ascii_alphanumeric() && c != '-').unwrap_or(body.len());
        let name = body[..name_end].to_ascii_lowercase();
        let (attributes, after) = attributes(&body[name_end..]);
        let tag = &body[..body.len() - after.len()];
        if closes {
            self.close(&name);
            return after;
        }
        if DROPPED_WHOLE.contains(&name.as_str()) {
            return past_end(after, &name);
        }
        self.start(&name, &attributes);
        // Of the elements that are kept, only those of mathematics can end in their own tag.
        if name.starts_with('m') && name != "mark" && tag.ends_with("/>") {
            self.close(&name);
        }
        after
    }

    fn close(&mut self, name: &str) {
        let renamed = |open: &String| open == name || (is_heading(name) && open == "div");
        if let Some(at) = self.open.iter().rposition(renamed) {
            while self.open.len() > at {
                let open = self.open.pop().unwrap_or_default();
                self.end(&open);
            }
        }
    }

    fn start(&mut self, name: &str, attributes: &[(String, String)]) {
        if !ELEMENTS.contains(&name) {
            return;
        }
        let own_heading = attributes.iter().find(|(key, value)| {
            self.source == Source::Narrative
                && key == "id"
                && value.strip_prefix(HEADING).is_some_and(|n| n.parse::<u32>().is_ok())
        });
        let name = match is_heading(name) && own_heading.is_none() {
            true => "div",
            false => name,
        };
        self.out.push('<');
        self.out.push_str(name);
        if let Some((_, id)) = own_heading.filter(|_| is_heading(name)) {
            self.attribute("id", id);
        }
        for (key, value) in attributes {
            let allowed = match key.as_str() {
                "href" => name == "a" && is_link(value),
                "src" => name == "img" && value.starts_with("data:image/"),
                "style" => is_plain_style(value),
                key => ATTRIBUTES.contains(&key),
            };
            if allowed {
                self.attribute(key, value);
            }
        }
        if name == "img" && !attributes.iter().any(|(key, _)| key == "alt") {
            self.attribute("alt", "");
        }
        self.out.push('>');
        if !VOID.contains(&name) {
            self.open.push(name.to_owned());
        }
    }

    fn attribute(&mut self, key: &str, value: &str) {
        // The value is as it stood in HTML, so its character references stay.
        let value = value.replace('"', "&quot;").replace('<', "&lt;").replace('>', "&gt;");
        self.out.push_str(&format!(" {key}=\"{value}\""));
    }
}

fn is_heading(name: &str) -> bool {
    matches!(name.as_bytes(), [b'h', b'1'..=b'6'])
}

/// Addresses that a page may lead to; what else there is could be a program.
fn is_link(address: &str) -> bool {
    let address = address.trim_start().to_ascii_lowercase();
    ["http://", "https://", "mailto:", "#"].iter().any(|start| address.starts_with(start))
}

/// Colours, lengths and keywords, and nothing that loads or positions.
fn is_plain_style(style: &str) -> bool {
    let lower = style.to_ascii_lowercase();
    let plain = |c: char| c.is_ascii_alphanumeric() || " -.,:;()%+#".contains(c);
    lower.chars().all(plain)
        && !["url", "position", "expression", "import", "fixed"].iter().any(|no| lower.contains(no))
}

/// The attributes of a tag, and what follows the tag.
fn attributes(text: &str) -> (Vec<(String, String)>, &str) {
    let mut found = Vec::new();
    let mut rest = text;
    loop {
        rest = rest.trim_start_matches(|c: char| c.is_ascii_whitespace() || c == '/');
        if let Some(after) = rest.strip_prefix('>') {
            return (found, after);
        }
        if rest.is_empty() {
            return (found, rest);
        }
        // An equals sign in front belongs to the name (HTML Living Standard, 13.2.5.32).
        let from = usize::from(rest.starts_with('='));
        let end = rest[from..]
            .find(|c: char| c.is_ascii_whitespace() || matches!(c, '/' | '>' | '='))
            .map_or(rest.len(), |end| end + from);
        let key = rest[..end].to_ascii_lowercase();
        rest = rest[end..].trim_start();
        let mut value = "";
        if let Some(after) = rest.strip_prefix('=') {
            let after = after.trim_start();
            let quote = after.chars().next().filter(|c| matches!(c, '"' | '\''));
            match quote {
                Some(quote) => {
                    let inner = &after[1..];
                    let end = inner.find(quote).unwrap_or(inner.len());
                    value = &inner[..end];
                    rest = inner.get(end + 1..).unwrap_or_default();
                }
                None => {
                    let end = after
                        .find(|c: char| c.is_ascii_whitespace() || c == '>')
                        .unwrap_or(after.len());
                    value = &after[..end];
                    rest = &after[end..];
                }
            }
        }
        // The first of two attributes of one name counts.
        if !found.iter().any(|(known, _)| *known == key) {
            found.push((key, value.to_owned()));
        }
    }
}

/// What follows the closing tag of an element whose content is dropped.
fn past_end<'a>(text: &'a str, name: &str) -> &'a str {
    let lower = text.to_ascii_lowercase();
    let Some(at) = lower.find(&format!("</{name}")) else { return "" };
    text[at..].find('>').map_or("", |end| &text[at + end + 1..])
}

/// Text shown as itself, for what has no better form.
pub fn preformatted(text: &str) -> String {
    format!("<pre tabindex=\"0\">{}</pre>", escaped(text))
}

#[cfg(test)]
mod tests {
    use super::*;

    fn exhibit(html: &str) -> String {
        clean(html, Source::Exhibit)
    }

    #[test]
    fn what_could_run_load_or_pose_is_taken_out() {
        for (given, expected) in [
            ("a<script>alert(1)</script>b", "ab"),
            ("<SCRIPT type=\"application/json\" id=\"semiaxis-manifest\">{}</SCRIPT >x", "x"),
            ("<script>never closed", ""),
            ("<b onclick=\"x()\" id=\"y\">z</b>", "<b>z</b>"),
            ("<a href=\"javascript:x()\">z</a>", "<a>z</a>"),
            ("<a href=' JaVaScRiPt:x()'>z</a>", "<a>z</a>"),
            ("<a href=\"java&#115;cript:x()\">z</a>", "<a>z</a>"),
            (
                "<a href=\"https://example.org/?a=1&amp;b\">z</a>",
                "<a href=\"https://example.org/?a=1&amp;b\">z</a>",
            ),
            ("<img src=\"http://example.org/x.png\">", "<img alt=\"\">"),
            (
                "<img src=data:image/png;base64,AA alt='a\"b'>",
                "<img src=\"data:image/png;base64,AA\" alt=\"a&quot;b\">",
            ),
            ("<iframe src=x>y</iframe>z", "z"),
            ("<svg><a/></svg>z", "z"),
            ("<p style=\"background:url(x)\">", "<p></p>"),
            ("<p style=\"color:red\">", "<p style=\"color:red\"></p>"),
            ("<!-- </div> -->x<!doctype y>", "x"),
            ("<form><input value=x>y</form>", "y"),
        ] {
            assert_eq!(exhibit(given), expected, "{given}");
        }
    }

    #[test]
    fn elements_are_closed_and_strays_ignored() {
        assert_eq!(exhibit("<div><b>x"), "<div><b>x</b></div>");
        assert_eq!(exhibit("x</div></body></html>y"), "xy");
        assert_eq!(exhibit("<div><b>x</div>y</b>"), "<div><b>x</b></div>y");
        assert_eq!(exhibit("1 < 2 > 0 &lt; <3"), "1 &lt; 2 &gt; 0 &lt; &lt;3");
        assert_eq!(exhibit("<b"), "<b></b>");
        assert_eq!(exhibit("<b title=\"open"), "<b title=\"open\"></b>");
        assert_eq!(exhibit("<"), "&lt;");
    }

    #[test]
    fn elements_of_mathematics_may_end_in_their_own_tag() {
        assert_eq!(
            exhibit("<math><mspace width=\"1em\" /><mi>x</mi></math>"),
            "<math><mspace width=\"1em\"></mspace><mi>x</mi></math>"
        );
        assert_eq!(exhibit("<b/>x"), "<b>x</b>");
    }

    #[test]
    fn headings_of_others_are_no_part_of_the_outline() {
        assert_eq!(exhibit("<h1 id=\"s-1\">x</h1>"), "<div>x</div>");
        assert_eq!(clean("<h2>x</h2>", Source::Narrative), "<div>x</div>");
        assert_eq!(clean("<h2 id=\"s-4\">x</h2>", Source::Narrative), "<h2 id=\"s-4\">x</h2>");
        assert_eq!(clean("<h2 id=\"s-x\">x</h2>", Source::Narrative), "<div>x</div>");
    }

    proptest::proptest! {
        /// Whatever comes in, what comes out has no element that is not allowed, and as many ends as
        /// beginnings.
        #[test]
        fn anything_comes_out_balanced(html in "([<>/\"'= a-d!-]|<(b|div|script|table)|</(b|div|script|table)>){0,40}") {
            let out = clean(&html, Source::Exhibit);
            let lower = out.to_ascii_lowercase();
            proptest::prop_assert!(!lower.contains("<script"));
            for name in ["b", "div", "table"] {
                let starts = lower.matches(&format!("<{name}>")).count() + lower.matches(&format!("<{name} ")).count();
                proptest::prop_assert_eq!(starts, lower.matches(&format!("</{name}>")).count());
            }
            proptest::prop_assert_eq!(clean(&out, Source::Exhibit), out);
        }
    }
}
