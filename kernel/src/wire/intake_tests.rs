use super::*;
use base64::Engine as _;
use proptest::prelude::*;
use serde::Deserialize;

const DELIMITER: &[u8] = b"<IDS|MSG>";

/// Made by `golden/make_frames.py` with the library and version the file names.
const GOLDEN: &str = include_str!("golden/frames.json");

#[derive(Deserialize)]
struct Golden {
    made_by: String,
    key: String,
    messages: Vec<GoldenMessage>,
}

#[derive(Deserialize)]
struct GoldenMessage {
    frames: Vec<String>,
    r#type: String,
    content: Value,
    identities: usize,
    buffers: usize,
}

impl GoldenMessage {
    fn frames(&self) -> Vec<Vec<u8>> {
        let decode = |text: &String| base64::engine::general_purpose::STANDARD.decode(text);
        self.frames.iter().map(|text| decode(text).unwrap()).collect()
    }
}

fn golden() -> Golden {
    serde_json::from_str(GOLDEN).unwrap()
}

fn multipart(frames: Vec<Vec<u8>>) -> ZmqMessage {
    let mut frames = frames.into_iter();
    let mut message = ZmqMessage::from(frames.next().unwrap());
    frames.for_each(|frame| message.push_back(frame.into()));
    message
}

fn unsigned(header: &str, content: &str) -> ZmqMessage {
    let frames = [DELIMITER, b"", header.as_bytes(), b"{}", b"{}", content.as_bytes()];
    multipart(frames.iter().map(|frame| frame.to_vec()).collect())
}

fn header(message_type: &str) -> String {
    serde_json::json!({
        "msg_id": "1", "username": "u", "session": "s", "date": "2026-12-01T00:00:00Z",
        "msg_type": message_type, "version": "5.3"
    })
    .to_string()
}

#[test]
fn the_reference_clients_messages_are_let_in_and_read_the_same() {
    let golden = golden();
    assert!(golden.made_by.starts_with("jupyter_client 8.10.0"));
    let mut intake = Intake::new(&golden.key);
    for message in &golden.messages {
        let request = intake.admit(Inlet::Shell, multipart(message.frames())).unwrap();
        assert_eq!(request.defect, None, "{}", message.r#type);
        assert_eq!(request.message.header.msg_type, message.r#type);
        assert_eq!(request.message.header.session, "golden");
        assert_eq!(request.message.zmq_identities.len(), message.identities);
        assert_eq!(request.message.buffers.len(), message.buffers);
        assert!(request.message.parent_header.is_none());
        let read = serde_json::to_value(&request.message.content).unwrap();
        for (field, value) in message.content.as_object().unwrap() {
            assert_eq!(&read[field], value, "{} of {}", field, message.r#type);
        }
    }
}

#[test]
fn one_flipped_bit_anywhere_under_the_signature_is_refused() {
    let golden = golden();
    let mut intake = Intake::new(&golden.key);
    for message in &golden.messages {
        let frames = message.frames();
        let first = message.identities + 1;
        for frame in first..first + 5 {
            for bit in [0, 3, 7] {
                let mut changed = frames.clone();
                let middle = changed[frame].len() / 2;
                changed[frame][middle] ^= 1 << bit;
                let refusal = intake.admit(Inlet::Control, multipart(changed)).unwrap_err();
                assert!(matches!(refusal, Refusal::Unsigned { .. }), "{refusal}");
            }
        }
        // The untouched message still gets in: refused ones leave no trace.
        intake.admit(Inlet::Control, multipart(frames)).unwrap();
    }
}

#[test]
fn another_key_or_no_signature_is_refused_in_plain_words() {
    let golden = golden();
    let mut intake = Intake::new("another key");
    let refusal = intake.admit(Inlet::Shell, multipart(golden.messages[0].frames())).unwrap_err();
    let text = refusal.to_string();
    assert_eq!(text, "a message on the shell socket was refused: its signature is wrong");
    let refusal = intake.admit(Inlet::Shell, unsigned(&header("x"), "{}")).unwrap_err();
    assert!(matches!(refusal, Refusal::Unsigned { .. }));
}

#[test]
fn a_message_seen_before_is_refused_on_every_socket() {
    let golden = golden();
    let mut intake = Intake::new(&golden.key);
    let frames = || multipart(golden.messages[1].frames());
    intake.admit(Inlet::Shell, frames()).unwrap();
    for inlet in [Inlet::Shell, Inlet::Control, Inlet::Stdin] {
        let refusal = intake.admit(inlet, frames()).unwrap_err();
        assert!(matches!(refusal, Refusal::Replayed { .. }), "{refusal}");
    }
}

#[test]
fn without_a_key_signatures_are_not_looked_at_but_replays_are() {
    let mut intake = Intake::new("");
    let frames = || unsigned(&header("kernel_info_request"), "{}");
    let request = intake.admit(Inlet::Shell, frames()).unwrap();
    assert!(matches!(request.message.content, JupyterMessageContent::KernelInfoRequest(_)));
    assert!(matches!(intake.admit(Inlet::Shell, frames()), Err(Refusal::Replayed { .. })));
}

#[test]
fn malformed_content_is_let_in_with_its_defect_named() {
    let mut intake = Intake::new("");
    let frames = unsigned(&header("execute_request"), r#"{"code": 7}"#);
    let request = intake.admit(Inlet::Shell, frames).unwrap();
    let defect = request.defect.unwrap();
    assert!(defect.contains("execute_request") && defect.contains("integer `7`"), "{defect}");
    assert_eq!(request.message.header.msg_id, "1");

    let mut intake = Intake::new("");
    let request = intake.admit(Inlet::Shell, unsigned(&header("execute_request"), "{")).unwrap();
    assert!(request.defect.unwrap().starts_with("content is not JSON"));
}

#[test]
fn an_unknown_type_is_no_defect_and_an_unreadable_header_is_refused() {
    let mut intake = Intake::new("");
    let request = intake.admit(Inlet::Shell, unsigned(&header("none_such"), "[1]")).unwrap();
    assert_eq!(request.defect, None);
    let refusal = intake.admit(Inlet::Shell, unsigned("{\"msg_id\": 3}", "{}")).unwrap_err();
    assert!(refusal.to_string().contains("its header cannot be read"), "{refusal}");
}

/// Frames that are likely to get past the first checks: the delimiter, JSON of all sorts, and
/// anything at all.
fn frame() -> impl Strategy<Value = Vec<u8>> {
    prop_oneof![
        Just(DELIMITER.to_vec()),
        Just(b"{}".to_vec()),
        Just(header("execute_request").into_bytes()),
        Just(header("history_request").into_bytes()),
        Just(br#"{"code":"1","silent":false,"cursor_pos":-1}"#.to_vec()),
        "[\\[\\]{}:,\"a-z0-9\\\\]{0,40}".prop_map(String::into_bytes),
        prop::collection::vec(any::<u8>(), 0..64),
    ]
}

proptest! {
    #[test]
    fn arbitrary_frames_are_let_in_or_refused_but_never_panic(
        frames in prop::collection::vec(frame(), 1..10),
        key in prop_oneof![Just(""), Just("key")],
    ) {
        let mut intake = Intake::new(key);
        let signed = !key.is_empty();
        let admitted = intake.admit(Inlet::Shell, multipart(frames));
        // Nobody made these frames with the key.
        prop_assert!(!(signed && admitted.is_ok()));
    }

    #[test]
    fn signed_headers_and_contents_of_any_shape_never_panic(
        header in frame(), parent in frame(), metadata in frame(), content in frame(),
    ) {
        let frames = vec![b"id".to_vec(), DELIMITER.to_vec(), vec![], header, parent, metadata,
            content];
        let _ = Intake::new("").admit(Inlet::Shell, multipart(frames));
    }
}
