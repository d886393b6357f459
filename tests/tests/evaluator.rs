//! The plain Rust cells, through an independent evaluator: it must agree with what the kernel is
//! held to, wherever it can do the same.

use semiaxis_tests::evaluator::{Answer, Evaluator};
use semiaxis_tests::sequences::{self, Cell, Sequence, check_text};

#[test]
fn an_independent_evaluator_agrees_on_plain_rust() {
    let mut sequences = Vec::new();
    for name in sequences::names() {
        for sequence in sequences::read(&name) {
            if sequence.evaluator.is_none() {
                sequences.push((name.clone(), sequence));
            }
        }
    }
    // Cells spend most of their time in a compiler, so two evaluators share the work.
    let (first, second) = sequences.split_at(sequences.len() / 2);
    let wrong: Vec<String> = std::thread::scope(|scope| {
        let halves = [first, second].map(|half| scope.spawn(|| evaluate(half)));
        halves.into_iter().flat_map(|half| half.join().expect("an evaluator answers")).collect()
    });
    assert!(wrong.is_empty(), "the evaluator disagrees:\n{}", wrong.join("\n"));
}

fn evaluate(sequences: &[(String, Sequence)]) -> Vec<String> {
    let mut wrong = Vec::new();
    let mut evaluator = Evaluator::start();
    for (file, sequence) in sequences {
        evaluator.refresh();
        let mut problems = evaluate_one(&mut evaluator, file, sequence);
        // On a busy machine its analysis sometimes starts without the standard library, and then
        // knows no type all along; another process of it does.
        if problems.iter().any(|problem| problem.contains(WITHOUT_TYPES)) {
            evaluator = Evaluator::start();
            problems = evaluate_one(&mut evaluator, file, sequence);
        }
        wrong.extend(problems);
    }
    wrong
}

/// How the evaluator says that its analysis gave no type.
const WITHOUT_TYPES: &str = "Couldn't automatically determine type of variable";

fn evaluate_one(evaluator: &mut Evaluator, file: &str, sequence: &Sequence) -> Vec<String> {
    let mut wrong = Vec::new();
    for (cell_idx, cell) in sequence.cells.iter().enumerate() {
        if cell.evaluator_skip.is_some() {
            continue;
        }
        let answer = evaluator.evaluate(&cell.code);
        for problem in compare(cell, &answer) {
            wrong.push(format!(
                "{file}: {}: cell {}: {problem}\n    {answer:?}",
                sequence.name,
                cell_idx + 1,
            ));
        }
    }
    wrong
}

/// What is wrong with an answer, in words.
fn compare(cell: &Cell, answer: &Answer) -> Vec<String> {
    let mut wrong = Vec::new();
    let expected = match &cell.evaluator_outcome {
        Some(outcome) => outcome.as_str(),
        None if cell.must_fail() => "compile",
        None => "done",
    };
    if answer.kind != expected {
        wrong.push(format!("it ends with {:?}, not {expected:?}", answer.kind));
    }
    for code in &cell.error_codes {
        if expected == "compile" && !answer.codes.contains(code) {
            wrong.push(format!("its error codes are {:?}, without {code}", answer.codes));
        }
    }
    // Its output comes by lines, so whether the last one was ended cannot be told.
    let mut stdout = answer.stdout.clone();
    if !cell.stdout.as_deref().unwrap_or_default().ends_with('\n') && cell.stdout_bytes.is_none() {
        stdout = stdout.trim_end_matches('\n').to_owned();
    }
    cell.check_stdout(&stdout, &mut wrong);
    // It shows even the value of a cell that has none.
    let text = answer.text.as_deref().filter(|text| *text != "()");
    match &cell.evaluator_text {
        Some(expected) => check_text(Some(expected), &[], text, &mut wrong),
        None => check_text(cell.text.as_deref(), &cell.text_has, text, &mut wrong),
    }
    wrong
}
