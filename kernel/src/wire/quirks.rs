//! Quirks: what honest clients leave out, and what is then assumed.
//!
//! The kernel is strict in what it sends and tolerant in what it receives, but each tolerance
//! stands in one list with its reason. A field that is there and has the wrong type is never
//! covered: that request is malformed and is answered so.

use serde_json::{Map, Value, json};

/// One field that may be missing, or null, from one kind of request.
#[derive(Debug)]
struct Quirk {
    message: &'static str,
    field: &'static str,
    /// What is assumed, given the rest of the content.
    assume: fn(&Map<String, Value>) -> Value,
}

/// Every tolerance there is.
///
/// The defaults are those the protocol's page gives with each message; for history they are the
/// ones of the reference client, which itself leaves these fields out when its caller does.
const QUIRKS: &[Quirk] = &[
    Quirk { message: "execute_request", field: "silent", assume: |_| json!(false) },
    // "store_history: default True if silent is False".
    Quirk {
        message: "execute_request",
        field: "store_history",
        assume: |content| json!(content.get("silent") != Some(&json!(true))),
    },
    Quirk { message: "execute_request", field: "stop_on_error", assume: |_| json!(true) },
    // Some clients have no way to ask their user, and say so by leaving it out.
    Quirk { message: "execute_request", field: "allow_stdin", assume: |_| json!(false) },
    // Without a cursor the reference client means the end of the code.
    Quirk { message: "complete_request", field: "cursor_pos", assume: end_of_code },
    Quirk { message: "inspect_request", field: "cursor_pos", assume: end_of_code },
    Quirk { message: "history_request", field: "output", assume: |_| json!(false) },
    Quirk { message: "history_request", field: "raw", assume: |_| json!(true) },
    Quirk { message: "history_request", field: "start", assume: |_| json!(0) },
    // A range without an end goes on to the newest cell.
    Quirk { message: "history_request", field: "stop", assume: |_| json!(i32::MAX) },
    Quirk { message: "history_request", field: "n", assume: |_| json!(i32::MAX) },
    Quirk { message: "history_request", field: "pattern", assume: |_| json!("*") },
    Quirk { message: "history_request", field: "unique", assume: |_| json!(false) },
    Quirk { message: "shutdown_request", field: "restart", assume: |_| json!(false) },
    Quirk { message: "comm_open", field: "data", assume: |_| json!({}) },
    Quirk { message: "comm_msg", field: "data", assume: |_| json!({}) },
    Quirk { message: "comm_close", field: "data", assume: |_| json!({}) },
];

/// Fills in what a request of this type may leave out.
pub fn fill_in(message_type: &str, content: &mut Value) {
    let Value::Object(content) = content else { return };
    for quirk in QUIRKS.iter().filter(|quirk| quirk.message == message_type) {
        if content.get(quirk.field).is_none_or(Value::is_null) {
            let assumed = (quirk.assume)(content);
            content.insert(quirk.field.to_owned(), assumed);
        }
    }
}

fn end_of_code(content: &Map<String, Value>) -> Value {
    let code = content.get("code").and_then(Value::as_str).unwrap_or_default();
    json!(code.chars().count())
}

#[cfg(test)]
mod tests {
    use super::*;
    use jupyter_protocol::JupyterMessageContent;

    fn filled(message_type: &str, mut content: Value) -> Value {
        fill_in(message_type, &mut content);
        content
    }

    #[test]
    fn each_quirk_fills_its_field_when_missing_or_null_and_only_then() {
        for quirk in QUIRKS {
            let missing = filled(quirk.message, json!({"code": "añb"}));
            let null = filled(quirk.message, json!({"code": "añb", (quirk.field): null}));
            assert_eq!(missing[quirk.field], null[quirk.field], "{quirk:?}");
            assert!(!missing[quirk.field].is_null(), "{quirk:?}");
            let wrong = json!(["wrong type"]);
            let kept = filled(quirk.message, json!({(quirk.field): wrong}));
            assert_eq!(kept[quirk.field], wrong, "{quirk:?}");
        }
    }

    #[test]
    fn the_sparsest_honest_requests_become_whole() {
        for (message_type, content) in [
            ("execute_request", json!({"code": "1"})),
            ("complete_request", json!({"code": "1"})),
            ("inspect_request", json!({"code": "1"})),
            ("history_request", json!({"hist_access_type": "tail"})),
            ("history_request", json!({"hist_access_type": "range"})),
            ("history_request", json!({"hist_access_type": "search"})),
            ("shutdown_request", json!({})),
            ("comm_open", json!({"comm_id": "c", "target_name": "t"})),
        ] {
            let content = filled(message_type, content);
            let parsed = JupyterMessageContent::from_type_and_content(message_type, content);
            assert!(parsed.is_ok(), "{message_type}: {parsed:?}");
        }
    }

    #[test]
    fn a_silent_request_is_not_stored_unless_it_says_so() {
        let content = filled("execute_request", json!({"code": "", "silent": true}));
        assert_eq!(content["store_history"], json!(false));
    }

    #[test]
    fn the_assumed_cursor_counts_characters_not_bytes() {
        let content = filled("complete_request", json!({"code": "añb"}));
        assert_eq!(content["cursor_pos"], json!(3));
    }

    #[test]
    fn other_messages_and_contents_that_are_no_objects_are_left_alone() {
        assert_eq!(filled("kernel_info_request", json!({})), json!({}));
        assert_eq!(filled("execute_request", json!([1])), json!([1]));
    }
}
