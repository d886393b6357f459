//! Completion and inspection over a small session and a small index.

use super::index::{Entry, EntryKind, Index};
use super::*;
use crate::cells::types::{ItemInfo, ItemKind, Scope, VariableInfo};

fn entry(name: &str, kind: EntryKind, signature: &str, owner: Option<&str>) -> Entry {
    Entry {
        name: name.to_owned(),
        kind,
        signature: signature.to_owned(),
        docs: format!("About {name}, a < b."),
        owner: owner.map(str::to_owned),
        origin: "semiaxis".to_owned(),
        preloaded: owner.is_none(),
    }
}

fn index() -> Index {
    use EntryKind::*;
    Index {
        entries: vec![
            entry("weigh", Function, "fn weigh(batch: &Batch) -> Result<Weights>", None),
            entry("Batch", Struct, "struct Batch", None),
            entry("open", AssociatedFunction, "fn open(path: &str) -> Result<Self>", Some("Batch")),
            entry("tiles", Method, "fn tiles(&self) -> usize", Some("Batch")),
            entry("kiln", Field, "kiln: Kiln", Some("Batch")),
            entry("heat", Method, "fn heat(&self) -> f64", Some("Kiln")),
            entry("Weights", Struct, "struct Weights", None),
            entry("heaviest", Method, "fn heaviest(&self, n: usize) -> Vec<f64>", Some("Weights")),
            entry("Glaze", Enum, "enum Glaze { Clear, Grey }", None),
            entry("Clear", Variant, "Glaze::Clear", Some("Glaze")),
            entry("determinant", Method, "fn determinant(&self) -> T", Some("Matrix")),
        ],
    }
}

fn scope() -> Scope {
    let variable = |name: &str, type_text: &str, cell| VariableInfo {
        name: name.to_owned(),
        type_text: type_text.to_owned(),
        mutable: name == "batch",
        cell,
    };
    Scope {
        variables: vec![
            variable("batch", "semiaxis::Batch", 2),
            variable("größe", "f64", 3),
            variable(
                "m",
                "semiaxis::nalgebra::Matrix<f64, Dyn, Dyn, VecStorage<f64, Dyn, Dyn>>",
                3,
            ),
        ],
        items: vec![ItemInfo {
            name: "Shelf".to_owned(),
            kind: ItemKind::Struct,
            signature: "struct Shelf".to_owned(),
            docs: "Where tiles dry.".to_owned(),
            cell: 4,
            methods: vec![
                ("new".into(), "fn new() -> Self".into(), String::new()),
                ("dry".into(), "fn dry(&self) -> Batch".into(), "Dries.".into()),
            ],
        }],
    }
}

/// Texts suggested at the `|` in a cell, and the replaced stretch.
fn at(code: &str) -> (Vec<String>, usize, usize) {
    let cursor = code.chars().position(|c| c == '|').unwrap();
    let found = complete(&code.replacen('|', "", 1), cursor, &scope(), &index());
    (found.matches.into_iter().map(|m| m.text).collect(), found.start, found.end)
}

fn texts(code: &str) -> Vec<String> {
    at(code).0
}

#[test]
fn names_of_the_session_come_before_those_of_the_prelude() {
    assert_eq!(at("ba|"), (vec!["batch".to_owned()], 0, 2));
    assert_eq!(texts("let x = Ba|"), ["Batch"]);
    assert_eq!(texts("let x = she|"), ["Shelf"]);
    assert_eq!(texts("let wide = 1; wei|"), ["weigh"]);
    assert_eq!(texts("let wide = 1; wi|"), ["wide"]);
    assert_eq!(texts("whi|"), ["while"]);
    assert!(texts("x = pr|").contains(&"println!".to_owned()));
    assert!(texts("fn ba|").is_empty());
}

#[test]
fn positions_are_code_points() {
    assert_eq!(at("\"ü𝛼\"; grö|"), (vec!["größe".to_owned()], 6, 9));
    let beyond = complete("ba", 100, &scope(), &index());
    assert_eq!((beyond.start, beyond.end), (0, 2));
}

#[test]
fn members_follow_the_type() {
    assert_eq!(texts("batch.|"), ["tiles", "kiln"]);
    assert_eq!(texts("batch.kiln.|"), ["heat"]);
    assert_eq!(texts("weigh(&batch)?.|"), ["heaviest"]);
    assert_eq!(texts("weigh(&batch).unwrap().he|"), ["heaviest"]);
    assert_eq!(texts("Batch::open(\"a\")?.t|"), ["tiles"]);
    assert_eq!(texts("let w = weigh(&batch)?;\nlet w = w;\nw.|"), ["heaviest"]);
    assert_eq!(texts("let w: Weights = make();\nw.|"), ["heaviest"]);
    assert_eq!(texts("Shelf::new().dry().ki|"), ["kiln"]);
    assert_eq!(texts("m.det|"), ["determinant"]);
    assert_eq!(texts("(&batch).tiles().|"), [""; 0]);
    assert_eq!(texts("Glaze::|"), ["Clear"]);
    assert_eq!(texts("Shelf::|"), ["new", "dry"]);
    assert!(texts("unknown.|").is_empty());
    assert!(texts("let a = a; a.|").is_empty());
}

#[test]
fn nothing_is_suggested_inside_text_and_comments() {
    for code in ["\"ba|", "// ba|", "/* ba|", "1.|", "'b|"] {
        assert!(texts(code).is_empty(), "{code}");
    }
}

#[test]
fn a_header_offers_its_settings() {
    assert_eq!(texts("---\n|"), ["[dependencies]", "[cell]"]);
    assert_eq!(at("---\n[ce|\n---\n"), (vec!["[cell]".to_owned()], 4, 7));
    assert_eq!(texts("---\n[cell]\nop|\n---\n"), ["optimise = "]);
    assert_eq!(texts("---\n[cell]\nseed = 1\n|\n---\n"), ["optimise = ", "[dependencies]"]);
    assert_eq!(texts("---\n[cell]\n---\nbat|"), ["batch"]);
}

fn explained(code: &str, detail: u8) -> Option<String> {
    let cursor = code.chars().position(|c| c == '|').unwrap();
    let found = inspect(&code.replacen('|', "", 1), cursor, detail, &scope(), &index())?;
    assert!(found["text/html"].as_str().unwrap().find("a < b").is_none(), "HTML is escaped");
    assert!(found["text/markdown"].as_str().unwrap().starts_with("```rust\n"));
    Some(found["text/plain"].as_str().unwrap().to_owned())
}

#[test]
fn inspection_says_what_a_name_is() {
    let variable = explained("bat|ch.tiles()", 0).unwrap();
    assert_eq!(variable, "let mut batch: semiaxis::Batch\nvariable, made in cell [2]");
    let method = explained("batch.tiles|()", 0).unwrap();
    assert!(
        method.starts_with("fn tiles(&self) -> usize\nmethod, of Batch in semiaxis\n\nAbout tiles")
    );
    let around = explained("weigh(&batch, |)", 0).unwrap();
    assert!(around.starts_with("fn weigh(batch: &Batch)"), "{around}");
    assert!(
        explained("She|lf::new()", 0).unwrap().contains("defined in cell [4]\n\nWhere tiles dry.")
    );
    assert!(explained("Shelf::ne|w()", 0).unwrap().starts_with("fn new() -> Self"));
    assert!(explained("Bat|ch", 1).unwrap().contains("\n    fn tiles(&self) -> usize"));
    assert!(explained("println!(\"{}\", |)", 0).unwrap().starts_with("println!"));
    assert_eq!(explained("nonsense|", 0), None);
    assert_eq!(explained("|", 0), None);
    assert_eq!(explained("---\n[ce|ll]\n---\n", 0), None);
}

proptest::proptest! {
    #[test]
    fn any_text_at_any_place_is_answered(code in "\\PC{0,40}|[a-z.:(){}\\[\\]\"'?|!#\n -]{0,40}", cursor in 0usize..50) {
        let found = complete(&code, cursor, &scope(), &index());
        proptest::prop_assert!(found.start <= found.end && found.end <= code.chars().count());
        inspect(&code, cursor, 1, &scope(), &index());
        completeness(&code);
    }
}
