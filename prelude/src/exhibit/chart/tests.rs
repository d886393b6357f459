//! What charts must hold: marks and labels that are there, nothing that escapes, the same bytes.

use nalgebra::DMatrix;
use polars::prelude::{NamedFrom, Series};
use resvg::usvg::roxmltree;

use super::source::Source;
use super::*;
use crate::components::{PrincipalComponents, Scaling, principal_components};
use crate::error::Error;
use crate::parallel::{ParallelOptions, parallel_analysis};
use crate::table::DataMatrix;

const HOSTILE: [&str; 7] = [
    "<script>alert('tile')</script>",
    "quote\" and 'apostrophe' & more",
    "line\nbreak\ttab",
    "\u{1b}[31mred\u{0}",
    "\u{202e}reversed",
    "عرض القرميد",
    "🧱 高さ",
];

// Three hidden sequences behind the columns, without a random generator: any mixture will do.
fn mixture(n_rows: usize, n_cols: usize) -> DMatrix<f64> {
    DMatrix::from_fn(n_rows, n_cols, |i, j| {
        let (i, j) = (i as f64 + 1.0, j as f64 + 1.0);
        let wave = |k: f64| (i * k * 0.618_034).fract() - 0.5;
        3.0 * wave(1.0) * (j * 0.9).cos() + 2.0 * wave(3.1) * (j * 1.7).sin() + wave(7.3 + j)
    })
}

fn analysis(n_rows: usize, n_cols: usize) -> PrincipalComponents {
    let variables = (1..=n_cols).map(|j| format!("variable {j}"));
    let labels = (1..=n_rows).map(|i| format!("tile {i}"));
    named(mixture(n_rows, n_cols), variables, labels)
}

fn named(
    values: DMatrix<f64>,
    variables: impl IntoIterator<Item = String>,
    labels: impl IntoIterator<Item = String>,
) -> PrincipalComponents {
    let x = DataMatrix::from_values(values, variables, labels).unwrap();
    principal_components(&x, Scaling::Correlation).unwrap()
}

fn kilns(n: usize) -> Vec<&'static str> {
    (0..n).map(|i| ["north", "middle", "south"][i % 3]).collect()
}

fn count(svg: &str, part: &str) -> usize {
    svg.matches(part).count()
}

// Attributes of all elements of one class, by a real XML parser: it also proves that the document
// is well-formed.
fn tree(svg: &str) -> roxmltree::Document<'_> {
    roxmltree::Document::parse(svg).unwrap()
}

fn of_class<'a>(document: &'a roxmltree::Document, class: &'a str) -> Vec<roxmltree::Node<'a, 'a>> {
    document.descendants().filter(|node| node.attribute("class") == Some(class)).collect()
}

fn number(node: &roxmltree::Node, name: &str) -> f64 {
    node.attribute(name).unwrap().parse().unwrap()
}

#[test]
fn every_unit_has_a_mark_with_its_name_and_values() {
    let pca = analysis(60, 6);
    let svg = score_plot(&pca).groups(kilns(60)).svg();
    let document = tree(&svg);
    let marks: usize = of_class(&document, "marks").iter().map(|g| g.children().count()).sum();
    assert_eq!(marks, 60);
    for label in pca.labels() {
        assert_eq!(count(&svg, &format!("<title>{label} · ")), 1, "{label}");
    }
    let value = crate::exhibit::significant(pca.scores().values()[(0, 0)], 4);
    let shown = value.replace('-', "\u{2212}");
    assert!(svg.contains(&format!("<title>tile 1 · north · component 1: {shown}")), "{shown}");
}

#[test]
fn marks_stand_where_the_scores_say() {
    let pca = analysis(40, 5);
    let svg = score_plot(&pca).components(2, 3).svg();
    let document = tree(&svg);
    let marks = of_class(&document, "marks");
    let places: Vec<(f64, f64)> =
        marks[0].children().map(|mark| (number(&mark, "cx"), number(&mark, "cy"))).collect();
    let scores = pca.scores().values();
    // One scale for both axes: distances in the drawing are those of the scores times a constant.
    let distance = |a: (f64, f64), b: (f64, f64)| (a.0 - b.0).hypot(a.1 - b.1);
    let score = |unit: usize| (scores[(unit, 1)], scores[(unit, 2)]);
    let scale = distance(places[0], places[1]) / distance(score(0), score(1));
    for unit in 2..40 {
        let drawn = distance(places[0], places[unit]);
        // Coordinates are rounded to a tenth of a pixel.
        assert!((drawn - scale * distance(score(0), score(unit))).abs() < 1.5, "unit {unit}");
        let upwards = places[0].1 > places[unit].1;
        assert_eq!(upwards, score(unit).1 > score(0).1, "up is positive");
    }
}

#[test]
fn legends_stand_only_where_there_are_groups() {
    let pca = analysis(30, 4);
    assert!(!score_plot(&pca).svg().contains("north"));
    let svg = score_plot(&pca).groups(kilns(30)).svg();
    for name in ["north (10)", "middle (10)", "south (10)"] {
        assert!(svg.contains(&format!(">{name}</text>")), "{name}");
    }
}

#[test]
fn ellipses_say_what_they_are_and_what_they_are_not() {
    let pca = analysis(30, 4);
    let plain = score_plot(&pca);
    assert_eq!(count(&plain.svg(), "<ellipse"), 0);
    let grouped = plain.clone().groups(kilns(30));
    assert_eq!(count(&grouped.svg(), "<ellipse"), 3);
    let svg = plain.coverage(0.9).svg();
    assert_eq!(count(&svg, "<ellipse"), 1);
    assert!(svg.contains("90 % of a normal distribution"));
    assert!(svg.contains("safety limits"));
}

#[test]
fn small_and_missing_groups_are_named_not_guessed() {
    let pca = analysis(12, 4);
    let groups = Series::new(
        "kiln".into(),
        [
            Some("a"),
            Some("a"),
            None,
            Some("a"),
            Some("b"),
            None,
            Some("a"),
            Some("b"),
            Some("a"),
            Some("a"),
            None,
            Some(""),
        ],
    );
    let svg = score_plot(&pca).groups(&groups).size(1200, 700).svg();
    for name in ["a (6)", "b (2)", "(empty name) (1)", "no group (3)"] {
        assert!(svg.contains(&format!(">{name}</text>")), "{name}");
    }
    assert_eq!(count(&svg, "<ellipse"), 1);
    assert!(svg.contains("No ellipse for b and (empty name)"), "{svg}");
}

#[test]
fn hostile_names_are_shown_and_do_nothing() {
    let n = HOSTILE.len();
    let texts = || HOSTILE.iter().map(|text| text.to_string());
    let pca = named(mixture(n, n), texts(), texts());
    for chart in [
        score_plot(&pca).groups(HOSTILE).title(HOSTILE[0]),
        loading_plot(&pca).title(HOSTILE[3]),
        biplot(&pca).groups(HOSTILE).labels(HOSTILE),
        scree(&pca).title(HOSTILE[1]),
    ] {
        chart.check().unwrap();
        let svg = chart.svg();
        let document = tree(&svg);
        for node in document.descendants().filter(|node| node.is_element()) {
            let name = node.tag_name().name();
            assert!(
                ["svg", "title", "desc", "g", "rect", "text", "line", "path", "circle", "ellipse"]
                    .contains(&name),
                "{name}"
            );
            assert!(node.attributes().all(|a| !a.name().starts_with("on")));
        }
        assert!(!svg.chars().any(|c| c.is_control()), "{svg:?}");
        assert!(!svg.contains('\u{202e}'));
        let plain = chart.exhibit().text("text/plain").unwrap().to_owned();
        assert!(!plain.contains('\u{1b}'));
    }
    let svg = loading_plot(&pca).svg();
    assert!(svg.contains("&lt;script&gt;"));
    assert!(svg.contains("عرض القرميد"));
}

#[test]
fn very_long_labels_are_cut() {
    let long = "tile ".repeat(400);
    let pca = analysis(10, 4);
    let svg =
        score_plot(&pca).labels(vec![long.as_str(); 10]).groups(vec![long.as_str(); 10]).svg();
    assert!(svg.len() < 40_000, "{}", svg.len());
    let svg = score_plot(&pca).title(long).svg();
    assert!(svg.len() < 40_000, "{}", svg.len());
}

#[test]
fn one_component_is_drawn_along_a_line() {
    let x = DMatrix::from_fn(8, 3, |i, j| (i as f64) * (j as f64 + 1.0));
    let pca = named(x, ["a", "b", "c"].map(String::from), (0..8).map(|i| i.to_string()));
    assert_eq!(pca.n_components(), 1);
    for chart in [score_plot(&pca), loading_plot(&pca), biplot(&pca), scree(&pca)] {
        chart.check().unwrap();
        let bundle = chart.exhibit();
        assert!(bundle.text("image/svg+xml").is_some());
    }
    assert!(score_plot(&pca).svg().contains("no second component"));
    assert!(matches!(
        score_plot(&pca).components(1, 2).check(),
        Err(Error::ComponentOutOfRange { asked: 2, available: 1 })
    ));
}

#[test]
fn settings_that_do_not_fit_are_errors_and_are_shown() {
    let pca = analysis(20, 4);
    for (chart, words) in [
        (score_plot(&pca).groups(["a", "b"]), "20"),
        (score_plot(&pca).labels(["a"]), "20"),
        (loading_plot(&pca).labels(["a"]), "4"),
        (score_plot(&pca).components(1, 9), "9"),
        (score_plot(&pca).components(2, 2), "two different components"),
        (score_plot(&pca).components(0, 1), "0"),
        (score_plot(&pca).coverage(1.0), "coverage"),
        (score_plot(&pca).coverage(f64::NAN), "coverage"),
        (score_plot(&pca).size(10, 500), "240"),
        (scree(&pca).groups(kilns(20)), "groups"),
        (scree(&pca).components(1, 2), "components"),
        (biplot(&pca).reference(Reference::BrokenStick), "reference"),
    ] {
        let message = chart.check().unwrap_err().to_string();
        assert!(message.contains(words), "{message}");
        let bundle = chart.exhibit();
        assert!(bundle.text("text/plain").unwrap().contains(&message));
        assert!(bundle.text("image/svg+xml").unwrap().contains("cannot be drawn"));
        tree(&chart.svg());
        assert!(chart.save("unused.svg").is_err());
    }
    let many: Vec<String> = (0..20).map(|i| format!("g{i}")).collect();
    score_plot(&pca).groups(&many).check().unwrap();
    let pca = analysis(70, 4);
    let many: Vec<String> = (0..70).map(|i| format!("g{i}")).collect();
    assert!(score_plot(&pca).groups(&many).check().is_err());
}

#[test]
fn a_scree_has_a_mark_for_each_component_and_the_references_asked_for() {
    let pca = analysis(50, 8);
    let svg = scree(&pca).svg();
    assert_eq!(count(&svg, "<title>component "), 8 + of_class(&tree(&svg), "segment").len());
    assert!(svg.contains("mean variance of the variables: 1<"));
    let x = pca.data().clone();
    let noise = parallel_analysis(&x, ParallelOptions::default().replicates(50).seed(3)).unwrap();
    let chart = scree(&pca).reference(&noise).reference(Reference::BrokenStick);
    let svg = chart.svg();
    assert!(svg.contains("noise: percentile 95 of 50 tables"));
    assert!(svg.contains("broken stick"));
    assert!(!svg.contains("mean variance"));
    let other = analysis(51, 8);
    assert!(matches!(
        scree(&other).reference(&noise).check(),
        Err(Error::ShapeMismatch { expected: 51, found: 50, .. })
    ));
    let covariance = principal_components(&x, Scaling::Covariance).unwrap();
    assert!(matches!(
        scree(&covariance).reference(&noise).check(),
        Err(Error::SettingNotForChart { .. })
    ));
}

#[test]
fn the_strip_is_as_long_as_the_total_variance() {
    let pca = analysis(50, 6);
    let svg = scree(&pca).svg();
    let document = tree(&svg);
    let segments = of_class(&document, "segment");
    let lengths: Vec<f64> = segments.iter().map(|segment| number(segment, "width")).collect();
    let total: f64 = lengths.iter().sum();
    for (length, share) in lengths.iter().zip(pca.proportions().iter()) {
        assert!((length / total - share).abs() < 0.002, "{length} {share}");
    }
}

#[test]
fn a_scree_of_many_components_counts_what_it_leaves_out() {
    let pca = analysis(80, 60);
    let svg = scree(&pca).svg();
    assert!(svg.contains("The first 40 of 60 components are drawn"));
    let document = tree(&svg);
    assert_eq!(
        of_class(&document, "marks")[0].children().filter(|n| n.has_tag_name("circle")).count(),
        40
    );
}

#[test]
fn loading_plots_have_an_arrow_and_a_name_for_each_variable() {
    let pca = analysis(40, 9);
    let svg = loading_plot(&pca).svg();
    let document = tree(&svg);
    assert_eq!(of_class(&document, "arrows")[0].children().count(), 9);
    for variable in pca.variables() {
        assert_eq!(count(&svg, &format!(">{variable}</text>")), 1, "{variable}");
    }
    // The arrows that are called faint are those shorter than the stated threshold.
    let loadings = pca.loadings().values();
    let threshold = (2.0f64 / 9.0).sqrt();
    let n_faint = (0..9).filter(|&j| loadings[(j, 0)].hypot(loadings[(j, 1)]) < threshold).count();
    assert!(n_faint > 0);
    let faint = palette::FAINT;
    let drawn = of_class(&document, "arrows")[0]
        .children()
        .filter(|arrow| arrow.attribute("stroke") == Some(faint))
        .count();
    assert_eq!(drawn, n_faint);
}

#[test]
fn biplots_hold_both_and_state_their_scaling() {
    let pca = analysis(45, 6);
    let svg = biplot(&pca).groups(kilns(45)).svg();
    let document = tree(&svg);
    assert_eq!(of_class(&document, "arrows")[0].children().count(), 6);
    let marks: usize = of_class(&document, "marks").iter().map(|g| g.children().count()).sum();
    assert_eq!(marks, 45);
    assert!(svg.contains("arrows are loadings stretched"));
}

#[test]
fn labels_do_not_overlap_and_stay_on_the_card() {
    let pca = analysis(28, 14);
    for chart in [score_plot(&pca), loading_plot(&pca), biplot(&pca)] {
        let svg = chart.svg();
        let document = tree(&svg);
        let size = 11.0;
        let boxes: Vec<card::Area> = of_class(&document, "labels")[0]
            .children()
            .map(|label| {
                let text = label.text().unwrap();
                let half = measure::width(text, size, measure::Weight::Regular) / 2.0;
                let (x, y) = (number(&label, "x"), number(&label, "y"));
                // Ascenders and descenders of the font, in parts of its size.
                card::Area {
                    left: x - half,
                    right: x + half,
                    top: y - 0.76 * size,
                    bottom: y + 0.2 * size,
                }
            })
            .collect();
        assert!(boxes.len() >= 12, "{}", boxes.len());
        for (i, a) in boxes.iter().enumerate() {
            assert!(a.left > 0.0 && a.right < 720.0 && a.top > 0.0, "{a:?}");
            assert!(boxes[..i].iter().all(|b| !a.overlaps(b)), "{a:?}");
        }
    }
}

#[test]
fn thousands_of_units_stay_small() {
    for n in [2_000, 20_000, 25_000] {
        let pca = analysis(n, 4);
        let groups: Vec<String> = (0..n).map(|i| format!("group {}", i * 7 % 30)).collect();
        let svg = score_plot(&pca).groups(&groups).svg();
        assert!(svg.len() < 400_000, "{n} units: {} bytes", svg.len());
        let document = tree(&svg);
        if n <= 20_000 {
            // In a path of many marks, each is a step: two numbers, apart by a space or a sign.
            let marks: usize = of_class(&document, "marks")
                .iter()
                .map(|path| path.attribute("d").unwrap().replace('m', "").replace('-', " -"))
                .map(|path| path.split_whitespace().count() / 2)
                .sum();
            assert_eq!(marks, n);
        } else {
            assert!(svg.contains("each hexagon counts the units inside it"));
            let counted: usize = of_class(&document, "counts")[0]
                .descendants()
                .filter(|node| node.has_tag_name("title"))
                .map(|title| {
                    title.text().unwrap().split(' ').next().unwrap().replace('\u{202f}', "")
                })
                .map(|count| count.parse::<usize>().unwrap())
                .sum();
            assert_eq!(counted, n);
        }
    }
}

#[test]
fn thousands_of_variables_and_awkward_names_stay_small() {
    let pca = analysis(6, 5_000);
    let svg = loading_plot(&pca).svg();
    assert!(svg.len() < 400_000, "{} bytes", svg.len());
    assert!(svg.contains("The 400 longest of 5000 arrows are drawn."));
    assert_eq!(of_class(&tree(&svg), "arrows")[0].children().count(), 400);
    // Each of these characters takes six bytes once it is escaped.
    let names: Vec<String> = (0..2_000).map(|i| format!("{i}{}", "\"".repeat(90))).collect();
    let pca = analysis(2_000, 4);
    let svg = biplot(&pca).labels(&names).groups(kilns(2_000)).svg();
    assert!(svg.len() < 400_000, "{} bytes", svg.len());
    assert!(svg.contains("Too many units for hover texts."));
}

#[test]
fn extreme_sizes_of_values_are_drawn() {
    for factor in [1e-120, 1e-9, 1e9, 1e120] {
        let labels = (0..9).map(|i| format!("tile {i}"));
        let variables = ["a", "b", "c"].map(String::from);
        let x = DataMatrix::from_values(mixture(9, 3) * factor, variables, labels).unwrap();
        let pca = principal_components(&x, Scaling::Covariance).unwrap();
        for chart in [score_plot(&pca).coverage(0.9), biplot(&pca), scree(&pca), loading_plot(&pca)]
        {
            let svg = chart.svg();
            tree(&svg);
            assert!(!svg.contains("NaN") && !svg.contains("inf\""), "{factor}");
            assert!(svg.len() < 40_000, "{factor}: {}", svg.len());
        }
    }
}

#[test]
fn the_same_chart_gives_the_same_bytes_and_other_charts_other_names() {
    let pca = analysis(30, 5);
    let draw = || score_plot(&pca).groups(kilns(30)).svg();
    assert_eq!(draw(), draw());
    let ids = |svg: &str| -> Vec<String> {
        tree(svg).descendants().filter_map(|node| node.attribute("id").map(String::from)).collect()
    };
    let (a, b) = (ids(&draw()), ids(&scree(&pca).svg()));
    assert!(!a.is_empty() && a.iter().all(|id| !b.contains(id)), "{a:?} {b:?}");
}

#[test]
fn charts_speak_to_screen_readers_and_consoles() {
    let pca = analysis(30, 5);
    for chart in [scree(&pca), score_plot(&pca).groups(kilns(30)), loading_plot(&pca), biplot(&pca)]
    {
        let bundle = chart.exhibit();
        let svg = bundle.text("image/svg+xml").unwrap();
        let document = tree(svg);
        let root = document.root_element();
        assert_eq!(root.attribute("role"), Some("img"));
        let described: Vec<&str> = root.attribute("aria-labelledby").unwrap().split(' ').collect();
        for id in described {
            assert!(document.descendants().any(|node| node.attribute("id") == Some(id)));
        }
        let words = bundle.text("text/plain").unwrap();
        assert!(words.contains("30 units"), "{words}");
        assert!(!words.contains('\n'));
        let desc = document.descendants().find(|node| node.has_tag_name("desc")).unwrap();
        assert_eq!(desc.text(), Some(words));
    }
}

#[test]
fn small_charts_come_with_a_picture_of_their_own_size() {
    let png = |n: usize| {
        let pca = analysis(n, 4);
        let bundle = score_plot(&pca).groups(kilns(n)).exhibit();
        bundle.entries().iter().find(|(mime, _)| mime == "image/png").map(|(_, png)| png.clone())
    };
    let Some(Content::Bytes(bytes)) = png(30) else { panic!("no picture") };
    assert_eq!(&bytes[..8], b"\x89PNG\r\n\x1a\n");
    assert_eq!(bytes[16..24], [720u32.to_be_bytes(), 560u32.to_be_bytes()].concat());
    assert_eq!(png(1_000), None);
}

#[test]
fn files_are_written_by_extension() {
    let dir = tempfile::tempdir().unwrap();
    let pca = analysis(30, 5);
    let chart = score_plot(&pca).groups(kilns(30));
    let svg_path = dir.path().join("scores.svg");
    chart.save(&svg_path).unwrap();
    assert_eq!(std::fs::read_to_string(&svg_path).unwrap(), chart.svg());
    let png_path = dir.path().join("scores.PNG");
    chart.save(&png_path).unwrap();
    let png = std::fs::read(&png_path).unwrap();
    assert_eq!(&png[..8], b"\x89PNG\r\n\x1a\n");
    // Width and height stand in the header chunk (PNG specification, section 11.2.1).
    assert_eq!(png[16..20], 1440u32.to_be_bytes());
    assert!(matches!(
        chart.save(dir.path().join("scores.jpg")),
        Err(Error::UnknownExtension { .. })
    ));
    assert!(matches!(chart.save(dir.path().join("no/such/scores.svg")), Err(Error::Io { .. })));
}

#[test]
fn a_small_chart_is_drawn_as_before() {
    // A snapshot, to notice changes: look at the picture before a new one is accepted. The other
    // tests of this file say what a chart must hold.
    let source = Source {
        scaling: Scaling::Covariance,
        n_rows: 4,
        variables: vec!["length".to_owned(), "width".to_owned()],
        labels: ["a", "b", "c", "d"].map(String::from).to_vec(),
        variances: vec![6.0, 2.0],
        total_variance: 8.0,
        loadings: DMatrix::identity(2, 2),
        scores: DMatrix::from_row_slice(4, 2, &[3.0, 1.0, -3.0, 1.0, -1.0, -2.0, 1.0, 0.0]),
    };
    let svg = scores::of(source).groups(["x", "y", "y", "y"]).svg();
    let expected = include_str!("snapshot.svg");
    assert!(svg == expected, "the chart is now drawn so:\n{svg}");
}

#[test]
fn the_numbers_behind_a_chart_go_with_it() {
    let pca = analysis(30, 5);
    let behind = |chart: Chart| {
        let bundle = chart.exhibit();
        let found = bundle.entries().iter().find(|(mime, _)| mime == NUMBERS).map(|(_, c)| c);
        match found {
            Some(Content::Json(numbers)) => numbers.clone(),
            other => panic!("{other:?}"),
        }
    };
    let scores = behind(score_plot(&pca).components(2, 1).groups(kilns(30)));
    assert_eq!(scores["groups"][1], "middle");
    assert_eq!(scores["units"][29], "tile 30");
    let (x, expected) = (scores["sideways"][7].as_f64().unwrap(), pca.scores()[(7, 1)]);
    assert!((x - expected).abs() < 1e-10, "{x} {expected}");
    let scree = behind(scree(&pca));
    assert_eq!(scree["variances"].as_array().unwrap().len(), 5);
    assert_eq!(scree["references"][0]["values"][4], 1.0);
    let biplot = behind(biplot(&pca));
    let length = biplot["variables"]["upwards"][2].as_f64().unwrap();
    assert!((length - pca.loadings()[(2, 1)]).abs() < 1e-10);
}
