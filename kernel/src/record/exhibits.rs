//! What cells showed, as HTML.

use base64::Engine as _;
use base64::engine::general_purpose::STANDARD;
use serde_json::{Map, Value};

use super::evidence::joined;
use super::markup::{escaped, head, size};
use super::narrative::{mathematics, shown_markdown};
use super::sanitise::{Source, clean, preformatted};
use crate::notebook::screen::without_colours;

/// As much of one text is shown on the page, in bytes.
const MOST_SHOWN: usize = 64 * 1024;

/// Richer forms than this are replaced by the plain one.
const MOST_MARKUP: usize = 8 << 20;

/// The outputs of a cell.
pub fn html(outputs: &[Value]) -> String {
    let mut out = String::new();
    for output in outputs {
        match output["output_type"].as_str() {
            Some("stream") => {
                let class = if output["name"] == "stderr" { "said aside" } else { "said" };
                let text = without_colours(&joined(&output["text"]));
                out.push_str(&format!("<div class=\"{class}\">{}</div>\n", text_block(&text)));
            }
            Some("error") => out.push_str(&failure(output)),
            _ => {
                if let Some(forms) = output["data"].as_object() {
                    out.push_str(&exhibit(forms));
                }
            }
        }
    }
    out
}

fn text_block(text: &str) -> String {
    if text.len() <= MOST_SHOWN {
        return preformatted(text);
    }
    format!(
        "{}<p class=\"cut\">… {} more are not shown; the record holds the digest of the whole text.</p>",
        preformatted(head(text, MOST_SHOWN)),
        size((text.len() - head(text, MOST_SHOWN).len()) as u64)
    )
}

fn failure(output: &Value) -> String {
    let lines = output["traceback"].as_array().into_iter().flatten().filter_map(Value::as_str);
    let told: Vec<String> = lines.map(without_colours).collect();
    let name = output["ename"].as_str().unwrap_or_default();
    let value = output["evalue"].as_str().unwrap_or_default();
    let told = match told.is_empty() {
        true => format!("{name}: {value}"),
        false => told.join("\n"),
    };
    format!(
        "<div class=\"failure\"><p><strong>This cell failed.</strong></p>{}</div>\n",
        text_block(&told)
    )
}

fn exhibit(forms: &Map<String, Value>) -> String {
    let text = |mime: &str| forms.get(mime).map(joined).filter(|text| text.len() <= MOST_MARKUP);
    let words = text("text/plain").unwrap_or_default();
    if let Some(svg) = text("image/svg+xml") {
        // As a picture it can neither run nor load anything, and keeps its own styles to itself.
        let address = format!("data:image/svg+xml;base64,{}", STANDARD.encode(&svg));
        return picture(&address, &title(&svg).unwrap_or_else(|| first_line(&words)), &words);
    }
    if let Some(html) = text("text/html").filter(|html| !needs_scripts(html)) {
        let html = clean(&html, Source::Exhibit);
        return format!("<div class=\"exhibit\" tabindex=\"0\">{html}</div>\n");
    }
    for mime in ["image/png", "image/jpeg", "image/gif", "image/webp"] {
        if let Some(data) = text(mime) {
            let data: String =
                data.chars().filter(|c| c.is_ascii_alphanumeric() || "+/=".contains(*c)).collect();
            return picture(&format!("data:{mime};base64,{data}"), &first_line(&words), &words);
        }
    }
    if let Some(markdown) = text("text/markdown").filter(|_| words.trim().is_empty()) {
        return format!(
            "<div class=\"exhibit\" tabindex=\"0\">{}</div>\n",
            shown_markdown(&markdown)
        );
    }
    if let Some(tex) = text("text/latex").filter(|_| words.trim().is_empty()) {
        let tex = tex.trim().trim_matches('$');
        return format!("<div class=\"exhibit\" tabindex=\"0\">{}</div>\n", mathematics(tex, true));
    }
    if let Some(found) = forms.get("text/plain") {
        return format!(
            "<div class=\"said result\">{}</div>\n",
            text_block(&without_colours(&joined(found)))
        );
    }
    let kinds: Vec<String> = forms.keys().map(|mime| escaped(mime)).collect();
    format!("<p class=\"cut\">An exhibit that a page cannot show: {}.</p>\n", kinds.join(", "))
}

/// Whether HTML is a program rather than a text; on a page that runs none its words say more.
fn needs_scripts(html: &str) -> bool {
    html.to_ascii_lowercase().contains("<script")
}

fn picture(address: &str, title: &str, words: &str) -> String {
    let words = match words.trim().is_empty() {
        true => String::new(),
        false => format!(
            "<details class=\"words\"><summary>In words</summary>{}</details>",
            text_block(&without_colours(words))
        ),
    };
    let title = if title.trim().is_empty() { "picture without a description" } else { title };
    format!(
        "<figure><img src=\"{}\" alt=\"{}\">{words}</figure>\n",
        escaped(address),
        escaped(&head(title, 500).replace('\n', " "))
    )
}

/// The title of an SVG document, as its text has it.
fn title(svg: &str) -> Option<String> {
    let start = svg.find("<title")?;
    let start = start + svg[start..].find('>')? + 1;
    let text = &svg[start..start + svg[start..].find("</title>")?];
    let text = text.replace("&lt;", "<").replace("&gt;", ">").replace("&quot;", "\"");
    Some(text.replace("&#39;", "'").replace("&amp;", "&")).filter(|text| !text.trim().is_empty())
}

fn first_line(words: &str) -> String {
    words.lines().find(|line| !line.trim().is_empty()).unwrap_or_default().to_owned()
}

#[cfg(test)]
mod tests {
    use super::*;
    use serde_json::json;

    #[test]
    fn the_richest_form_that_a_page_can_hold_is_shown() {
        let show = |data: Value| html(&[json!({"output_type": "display_data", "data": data})]);
        let shown = show(json!({"text/html": ["<b>x</b>", "<i></i>"], "text/plain": "x"}));
        assert_eq!(shown, "<div class=\"exhibit\" tabindex=\"0\"><b>x</b><i></i></div>\n");
        let svg = "<svg><title>Tiles &amp; \"kilns\"</title><script>x()</script></svg>";
        let shown =
            show(json!({"image/svg+xml": svg, "image/png": "AAAA", "text/plain": "a <chart>"}));
        assert!(shown.contains("alt=\"Tiles &amp; &quot;kilns&quot;\""), "{shown}");
        assert!(shown.contains("src=\"data:image/svg+xml;base64,") && !shown.contains("<script"));
        assert!(shown.contains("a &lt;chart&gt;"));
        let shown = show(json!({"image/png": "AA\"A\n=", "text/plain": ""}));
        assert!(
            shown.contains("base64,AAA=\"") && shown.contains("without a description"),
            "{shown}"
        );
        assert!(show(json!({"application/x": 1})).contains("cannot show: application/x"));
    }

    #[test]
    fn what_needs_scripts_is_shown_in_words_and_other_texts_are_read() {
        let show = |data: Value| html(&[json!({"output_type": "display_data", "data": data})]);
        let turning = show(
            json!({"text/html": "<canvas></canvas><script>x()</script>", "text/plain": "a cloud"}),
        );
        assert!(turning.contains("<pre tabindex=\"0\">a cloud</pre>"), "{turning}");
        assert!(show(json!({"text/markdown": "# a *b*"})).contains("<div>a <em>b</em></div>"));
        assert!(show(json!({"text/latex": "$\\frac{1}{2}$"})).contains("<mfrac>"));
    }

    #[test]
    fn text_is_escaped_cut_and_freed_of_colours() {
        let said =
            |text: &str| html(&[json!({"output_type": "stream", "name": "stdout", "text": text})]);
        assert!(said("\u{1b}[1m<a>\u{1b}[0m").contains("<pre tabindex=\"0\">&lt;a&gt;</pre>"));
        let long = said(&"x\n".repeat(50_000_000));
        assert!(
            long.len() < 70_000 && long.contains("… 99.9 MB more"),
            "{}",
            &long[long.len() - 200..]
        );
        let failed = html(&[
            json!({"output_type": "error", "ename": "Panic", "evalue": "<no>", "traceback": []}),
        ]);
        assert!(failed.contains("This cell failed") && failed.contains("Panic: &lt;no&gt;"));
    }
}
