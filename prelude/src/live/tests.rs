//! Tests of the worker's parts that need no process.

use super::cell::{Cell, words_of};
use super::message::{Command, How, Report, read_frame, write_frame};
use super::shelf::{Discarded, Kind, Shelf};

fn put<T: 'static>(shelf: &mut Shelf, name: &str, value: T) -> Option<Discarded> {
    // SAFETY: the box is of the type.
    unsafe { shelf.put(name, Box::into_raw(Box::new(value)).cast(), Kind::of::<T>()) }
}

fn take<T: 'static>(shelf: &mut Shelf, name: &str) -> Result<T, String> {
    let value = shelf.take(name, &Kind::of::<T>())?;
    // SAFETY: the shelf hands over the content of a box of this type.
    Ok(*unsafe { Box::from_raw(value.cast::<T>()) })
}

#[test]
fn a_shelf_gives_back_what_was_put() {
    let mut shelf = Shelf::default();
    assert!(put(&mut shelf, "x", vec![1, 2, 3]).is_none());
    assert!(shelf.fits("x", &Kind::of::<Vec<i32>>()).is_ok());
    assert_eq!(take::<Vec<i32>>(&mut shelf, "x"), Ok(vec![1, 2, 3]));
    assert!(!shelf.holds("x"));
}

#[test]
fn a_shelf_refuses_another_type_and_keeps_the_value() {
    let mut shelf = Shelf::default();
    put(&mut shelf, "x", 1.5f64);
    let error = take::<u64>(&mut shelf, "x").unwrap_err();
    assert!(error.contains("f64") && error.contains("u64"), "{error}");
    assert_eq!(take::<f64>(&mut shelf, "x"), Ok(1.5));
}

#[test]
fn relabelling_lets_a_twin_type_through_but_not_another_size() {
    #[derive(Debug, PartialEq)]
    struct First(u32);
    assert_ne!(First(6), First(7));
    #[derive(Debug, PartialEq)]
    struct Twin(u32);
    let mut shelf = Shelf::default();
    put(&mut shelf, "x", First(7));
    assert!(shelf.fits("x", &Kind::of::<Twin>()).is_err());
    shelf.relabel("x");
    assert!(shelf.fits("x", &Kind::of::<[u32; 2]>()).is_err());
    assert_eq!(take::<Twin>(&mut shelf, "x"), Ok(Twin(7)));
}

#[test]
fn a_panic_in_a_destructor_is_reported_and_goes_no_further() {
    struct Loud;
    impl Drop for Loud {
        fn drop(&mut self) {
            panic!("not quietly");
        }
    }
    let mut shelf = Shelf::default();
    put(&mut shelf, "x", Loud);
    let discarded = put(&mut shelf, "x", 1).expect("the old value comes back");
    assert_eq!(discarded.drop_quietly(), Err("not quietly".to_owned()));
    assert_eq!(take::<i32>(&mut shelf, "x"), Ok(1));
}

#[test]
fn a_variable_borrowed_by_a_panicking_body_goes_back() {
    let mut shelf = Shelf::default();
    put(&mut shelf, "x", vec![1]);
    let mut cell = Cell::new(&mut shelf);
    assert!(cell.ready::<Vec<i32>>("x"));
    let mut x: Vec<i32> = cell.take("x");
    cell.run(|_| {
        x.push(2);
        panic!("{}", "enough");
    });
    cell.put_back("x", x);
    let finished = cell.finish();
    assert!(matches!(finished.how, How::Panicked(trouble) if trouble.message == "enough"));
    assert!(finished.gone.is_empty());
    assert_eq!(take::<Vec<i32>>(&mut shelf, "x"), Ok(vec![1, 2]));
}

#[test]
fn a_moved_variable_is_reported_gone_and_a_new_one_kept() {
    let mut shelf = Shelf::default();
    put(&mut shelf, "x", String::from("moved"));
    let mut cell = Cell::new(&mut shelf);
    let x: String = cell.take("x");
    cell.run(|cell| {
        let y = x;
        cell.put("y", y);
        Ok(())
    });
    let finished = cell.finish();
    assert_eq!(finished.gone, ["x"]);
    assert_eq!(finished.kept, ["y"]);
    assert_eq!(take::<String>(&mut shelf, "y"), Ok("moved".to_owned()));
}

#[test]
fn errors_of_any_type_end_a_cell_with_their_words_and_line() {
    #[derive(Debug)]
    struct Odd {
        _code: u8,
    }
    fn end(body: impl FnOnce() -> Result<(), super::Failure>) -> super::message::Trouble {
        let mut shelf = Shelf::default();
        let mut cell = Cell::new(&mut shelf);
        cell.run(|_| body());
        match cell.finish().how {
            How::Failed(trouble) => trouble,
            other => panic!("{other:?}"),
        }
    }
    let parse = end(|| {
        let _: f64 = "x".parse()?;
        Ok(())
    });
    assert_eq!(parse.message, "invalid float literal");
    assert_eq!(parse.place.map(|place| place.line), Some(line!() - 4));
    assert_eq!(end(|| Err("plain words")?).message, "plain words");
    assert_eq!(end(|| Err(Odd { _code: 3 })?).message, "Odd { _code: 3 }");
    let boxed = || -> Result<(), Box<dyn std::error::Error>> { Err("in a box".into()) };
    assert_eq!(end(|| Ok(boxed()?)).message, "in a box");
}

#[test]
fn seeds_repeat_for_a_cell_and_differ_within_it() {
    super::begin(5);
    let first = [super::seed(), super::seed()];
    super::begin(5);
    assert_eq!([super::seed(), super::seed()], first);
    assert_ne!(first[0], first[1]);
}

#[test]
fn frames_survive_the_pipe_and_faults_are_errors() {
    let mut pipe = Vec::new();
    write_frame(&mut pipe, &Command::Forget { names: vec!["ä".into()] }).unwrap();
    let whole: Option<Command> = read_frame(&mut pipe.as_slice()).unwrap();
    assert!(matches!(whole, Some(Command::Forget { names }) if names == ["ä"]));
    assert!(read_frame::<Command>(&mut &pipe[..pipe.len() - 1]).is_err());
    assert!(read_frame::<Command>(&mut [255u8; 8].as_slice()).is_err());
    assert!(matches!(read_frame::<Report>(&mut [].as_slice()), Ok(None)));
}

#[test]
fn the_best_way_to_show_a_value_is_found_by_what_it_implements() {
    use crate::exhibit::{Bundle, Exhibit};
    struct Shown;
    impl Exhibit for Shown {
        fn exhibit(&self) -> Bundle {
            Bundle::new().with_plain("shown")
        }
    }
    #[derive(Debug)]
    struct Debugged;
    struct Silent;
    let text = |bundle: Bundle| bundle.text("text/plain").map(str::to_owned);
    assert_eq!(text(crate::bundle_of!(&Shown)).as_deref(), Some("shown"));
    assert_eq!(text(crate::bundle_of!(&1.5)).as_deref(), Some("1.5"));
    assert_eq!(text(crate::bundle_of!(&Debugged)).as_deref(), Some("Debugged"));
    let name = text(crate::bundle_of!(&Silent)).unwrap();
    assert!(name.ends_with("Silent"), "{name}");
}

#[test]
fn the_words_of_a_panic_are_found_inside_a_box() {
    let carried: Box<dyn std::any::Any + Send> =
        Box::new(Box::new("inner") as Box<dyn std::any::Any + Send>);
    assert_eq!(words_of(&*carried), "inner");
}
