//! Answers that need no engine: about the kernel itself, about code, and about what was run.
//!
//! Each is a function from a request's content to a reply's content. They read what the session
//! knows and change nothing, so they are given at once, also while a cell runs.
//!
//! Source: "Messages on the shell (ROUTER/DEALER) channel" of
//! <https://jupyter-client.readthedocs.io/en/stable/messaging.html>.

use std::panic::{AssertUnwindSafe, catch_unwind};

use jupyter_protocol::{
    CodeMirrorMode, CompleteReply, CompleteRequest, HelpLink, InspectReply, InspectRequest,
    IsCompleteReply, JupyterMessageContent, KernelInfoReply, LanguageInfo, Media, MediaType,
    ReplyStatus, UnknownMessage,
};
use serde_json::{Map, Value, json};

use crate::cells::types::{CellFailure, MimeBundle, Scope};
use crate::help::{self, Completeness, Completions, Index};
use crate::wire::note;

/// The version of the messaging protocol that the kernel speaks.
pub const PROTOCOL_VERSION: &str = "5.3";

/// The kernel about itself.
pub fn kernel_info() -> KernelInfoReply {
    let version = env!("CARGO_PKG_VERSION");
    let rust = env!("CARGO_PKG_RUST_VERSION");
    let link = |text: &str, url: &str| HelpLink { text: text.to_owned(), url: url.to_owned() };
    KernelInfoReply {
        status: ReplyStatus::Ok,
        protocol_version: PROTOCOL_VERSION.to_owned(),
        implementation: "semiaxis".to_owned(),
        implementation_version: version.to_owned(),
        language_info: LanguageInfo {
            name: "rust".to_owned(),
            version: rust.to_owned(),
            mimetype: Some("text/x-rust".to_owned()),
            file_extension: Some(".rs".to_owned()),
            pygments_lexer: Some("rust".to_owned()),
            codemirror_mode: Some(CodeMirrorMode::Simple("rust".to_owned())),
            nbconvert_exporter: None,
        },
        banner: format!(
            "Semiaxis {version}: multivariate analysis in compiled Rust {rust}.\n\
             Tables, principal components and charts are at hand without any `use`; begin with \
             read_table(\"file.csv\")?.\n"
        ),
        help_links: vec![
            link("The Rust standard library", "https://doc.rust-lang.org/std/"),
            link("Polars (tables)", "https://docs.rs/polars"),
            link("nalgebra (matrices)", "https://docs.rs/nalgebra"),
        ],
        debugger: false,
        error: None,
    }
}

/// Whether a client's console may send what was typed so far.
pub fn is_complete(code: &str) -> IsCompleteReply {
    match guarded("judging whether code is complete", || help::completeness(code)) {
        Some(Completeness::Complete) => IsCompleteReply::complete(),
        Some(Completeness::Incomplete { indent }) => IsCompleteReply::incomplete(indent),
        Some(Completeness::Invalid) => IsCompleteReply::invalid(),
        None => IsCompleteReply::unknown(),
    }
}

/// What could be typed at the cursor.
///
/// Clients that know it read what each suggestion is from the metadata, under the key that is in
/// common use for that; it is not part of the protocol's page.
pub fn complete(request: &CompleteRequest, scope: &Scope, index: &Index) -> CompleteReply {
    let cursor = request.cursor_pos.min(request.code.chars().count());
    let found = guarded("completing code", || help::complete(&request.code, cursor, scope, index));
    let Completions { matches, start, end } =
        found.unwrap_or_else(|| Completions { matches: Vec::new(), start: cursor, end: cursor });
    let described: Vec<Value> = matches
        .iter()
        .map(|found| {
            json!({
                "start": start, "end": end, "text": found.text, "type": found.kind,
                "signature": found.signature,
            })
        })
        .collect();
    let mut metadata = Map::new();
    metadata.insert("_jupyter_types_experimental".to_owned(), described.into());
    CompleteReply {
        matches: matches.into_iter().map(|found| found.text).collect(),
        cursor_start: start,
        cursor_end: end,
        metadata,
        ..CompleteReply::default()
    }
}

/// What stands at the cursor.
pub fn inspect(request: &InspectRequest, scope: &Scope, index: &Index) -> InspectReply {
    let cursor = request.cursor_pos.min(request.code.chars().count());
    let detail = u8::from(request.detail_level.unwrap_or(0) > 0);
    let found =
        guarded("inspecting code", || help::inspect(&request.code, cursor, detail, scope, index));
    match found.flatten() {
        Some(bundle) => InspectReply { found: true, data: media(bundle), ..Default::default() },
        None => InspectReply::default(),
    }
}

/// Code can be anything, and what looks at it is large; a panic in there must cost no more than
/// this one answer.
fn guarded<T>(task: &str, work: impl FnOnce() -> T) -> Option<T> {
    let result = catch_unwind(AssertUnwindSafe(work));
    if result.is_err() {
        note(format_args!("failed inside while {task}, which is a bug of its own"));
    }
    result.ok()
}

/// A bundle as the message types want it.
///
/// Every form is passed on as it is: the typed forms of the message library would refuse a bundle
/// whose content is not what they expect of its MIME type.
pub fn media(bundle: MimeBundle) -> Media {
    Media::new(bundle.into_iter().map(MediaType::Other).collect())
}

/// The answer to a request that cannot be served, under the name its reply would have.
///
/// Its content has the fields of every error reply; `count` goes into replies to cells, which
/// must have one.
pub fn refusal(message_type: &str, failure: &CellFailure, count: usize) -> JupyterMessageContent {
    let mut content = json!({
        "status": "error",
        "ename": failure.name,
        "evalue": failure.message,
        "traceback": failure.traceback,
    });
    if message_type == "execute_request" {
        content["execution_count"] = json!(count);
    }
    UnknownMessage { msg_type: message_type.to_owned(), content: json!(null) }.reply(content)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_kernel_names_its_language_as_clients_expect() {
        let info = serde_json::to_value(kernel_info()).unwrap();
        assert_eq!(info["status"], "ok");
        assert_eq!(info["protocol_version"], "5.3");
        assert_eq!(info["implementation"], "semiaxis");
        assert_eq!(info["language_info"]["name"], "rust");
        assert_eq!(info["language_info"]["file_extension"], ".rs");
        assert_eq!(info["language_info"]["mimetype"], "text/x-rust");
        assert_eq!(info["language_info"]["pygments_lexer"], "rust");
        assert_eq!(info["language_info"]["codemirror_mode"], "rust");
        assert!(info["banner"].as_str().unwrap().starts_with("Semiaxis"));
    }

    #[test]
    fn code_is_judged_completed_and_inspected() {
        use crate::cells::types::VariableInfo;
        let whole = serde_json::to_value(is_complete("1 + 1")).unwrap();
        assert_eq!(whole["status"], "complete");
        let open = serde_json::to_value(is_complete("fn f() {")).unwrap();
        assert_eq!(open["status"], "incomplete");
        assert!(open["indent"].as_str().unwrap().chars().all(|c| c == ' '));
        assert_eq!(serde_json::to_value(is_complete("}")).unwrap()["status"], "invalid");

        let scope = Scope {
            variables: vec![VariableInfo {
                name: "größe".to_owned(),
                type_text: "f64".to_owned(),
                mutable: false,
                cell: 3,
            }],
            items: Vec::new(),
        };
        let index = Index::default();
        let ask = CompleteRequest { code: "let y = grö".to_owned(), cursor_pos: 11 };
        let found = complete(&ask, &scope, &index);
        assert_eq!(found.matches, ["größe"]);
        assert_eq!((found.cursor_start, found.cursor_end), (8, 11));
        assert_eq!(found.metadata["_jupyter_types_experimental"][0]["text"], "größe");
        let ask =
            InspectRequest { code: "größe".to_owned(), cursor_pos: 2, detail_level: Some(0) };
        let known = inspect(&ask, &scope, &index);
        assert!(known.found);
        let text = serde_json::to_value(&known.data).unwrap();
        assert!(text["text/plain"].as_str().unwrap().contains("f64"), "{text}");
        let ask = InspectRequest { code: "unheard_of".to_owned(), ..ask };
        assert!(!inspect(&ask, &scope, &index).found);
    }

    #[test]
    fn a_cursor_beyond_the_code_means_its_end() {
        let ask = CompleteRequest { code: "zzz".to_owned(), cursor_pos: usize::MAX };
        let found = complete(&ask, &Scope::default(), &Index::default());
        assert!(found.cursor_end <= 3 && found.cursor_start <= found.cursor_end);
    }

    #[test]
    fn bundles_pass_through_unchanged_whatever_is_in_them() {
        let bundle = json!({
            "text/plain": "a\nb", "text/html": "<b>x</b>", "image/png": "AAAA",
            "application/json": {"a": [1, null]}, "application/vnd.dataresource+json": 3,
            "x/unknown": {"y": 1}
        });
        let passed = media(bundle.as_object().unwrap().clone());
        assert_eq!(serde_json::to_value(passed).unwrap(), bundle);
    }

    #[test]
    fn a_panic_in_a_helper_is_no_answer_and_nothing_worse() {
        assert_eq!(guarded("testing", || panic!("on purpose")), None::<u8>);
        assert_eq!(guarded("testing", || 3), Some(3));
    }

    #[test]
    fn a_refusal_has_the_reply_name_and_the_fields_of_an_error() {
        let failure = CellFailure {
            name: "N".into(),
            message: "m".into(),
            traceback: vec!["t".into()],
            line: None,
        };
        let content = refusal("execute_request", &failure, 4);
        assert_eq!(content.message_type(), "execute_reply");
        assert_eq!(
            serde_json::to_value(content).unwrap(),
            json!({"status": "error", "ename": "N", "evalue": "m", "traceback": ["t"],
                "execution_count": 4})
        );
        assert_eq!(refusal("none_such_request", &failure, 4).message_type(), "none_such_reply");
    }
}
