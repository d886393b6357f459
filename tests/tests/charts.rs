//! Every kind of chart on the demo's data, on hostile names and at its limits, measured in a
//! browser: no text cut or covered, a title and a description for screen readers.

use std::fmt::Write as _;

use semiaxis::nalgebra::DMatrix;
use semiaxis::prelude::*;
use semiaxis_tests::python::{Python, succeed};
use semiaxis_tests::{debian, place};

/// The bytes that a chart may take.
const MOST_BYTES: usize = 400_000;

/// The demo's tiles without those that miss a measurement, and their kilns.
fn tiles() -> (DataMatrix, Vec<String>) {
    let path = place::workspace().join("notebooks-demo/tiles.csv");
    let table = read_table(path).unwrap().drop_nulls::<String>(None).unwrap();
    let kilns = table.column("kiln").unwrap().str().unwrap().iter();
    let kilns = kilns.map(|kiln| kiln.unwrap().to_owned()).collect();
    (table.data_matrix().unwrap(), kilns)
}

/// Numbers without a random generator: any mixture will do.
fn mixture(n_rows: usize, n_cols: usize) -> DMatrix<f64> {
    DMatrix::from_fn(n_rows, n_cols, |i, j| {
        let (i, j) = (i as f64 + 1.0, j as f64 + 1.0);
        let wave = |k: f64| (i * k * 0.618_034).fract() - 0.5;
        3.0 * wave(1.0) * (j * 0.9).cos() + 2.0 * wave(3.1) * (j * 1.7).sin() + wave(7.3 + j)
    })
}

fn hostile() -> DataMatrix {
    let names = [
        "<script>alert('tile')</script>",
        "quote\" and 'apostrophe' & more",
        "line\nbreak\ttab",
        "\u{202e}reversed",
        "عرض القرميد",
        "🧱 高さ",
        "a name that goes on and on and on, far beyond what anybody would read in a chart",
    ];
    let labels = (0..40).map(|unit| format!("{} {unit}", names[unit % names.len()]));
    DataMatrix::from_values(mixture(40, names.len()), names, labels).unwrap()
}

/// All charts of one matrix, each with its name.
fn charts_of(what: &str, x: &DataMatrix, groups: &[String]) -> Vec<(String, Chart)> {
    let pca = principal_components(x, Scaling::Correlation).unwrap();
    let five: Vec<String> = x.variables().iter().take(5).cloned().collect();
    let few = x.select(&five).unwrap();
    let far = distances(&pca, 2).unwrap();
    let statistics = t_squared_and_q(&pca, 2).unwrap();
    let of_one = statistics.contributions(&x.labels()[3]).unwrap();
    let turned = pca.rotated(2, Rotation::Promax { power: 4.0 }).unwrap();
    [
        ("scree", scree(&pca).reference(Reference::BrokenStick)),
        ("scores", score_plot(&pca).groups(groups)),
        ("scores-hulls", score_plot(&pca).groups(groups).hulls()),
        ("score-matrix", score_matrix(&pca).groups(groups)),
        ("loadings", loading_plot(&pca)),
        ("loading-bars", loading_bars(&pca)),
        ("structure", structure_circle(&pca)),
        ("shares", variance_shares(&pca)),
        ("biplot", biplot(&pca).groups(groups)),
        ("correlations", correlation_map(x)),
        ("pairs", pairs(&few).groups(groups)),
        ("profiles", profiles(x).groups(groups)),
        ("distances", distance_plot(&far).groups(groups)),
        ("sequence", sequence_plot(&statistics)),
        ("contributions", contribution_plot(&of_one)),
        ("rotation", rotation_plot(turned.rotated())),
    ]
    .into_iter()
    .map(|(name, chart)| (format!("{what}-{name}"), chart))
    .collect()
}

#[test]
fn no_text_of_any_chart_is_cut_or_covered_in_a_browser() {
    let (x, kilns) = tiles();
    let mut charts = charts_of("tiles", &x, &kilns);
    let odd = hostile();
    let groups: Vec<String> =
        (0..odd.n_rows()).map(|unit| odd.variables()[unit % 3].clone()).collect();
    charts.extend(charts_of("hostile", &odd, &groups));
    let wide = DataMatrix::from_unnamed(mixture(30, 90)).unwrap();
    charts.extend(charts_of("wide", &wide, &vec!["all".to_owned(); 30]));
    let small = charts_of("small", &x, &kilns);
    charts.extend(small.into_iter().map(|(name, chart)| (name, chart.size(420, 360))));

    let mut page =
        String::from("<!doctype html><meta charset=\"utf-8\"><title>Charts</title><body>");
    for (name, chart) in &charts {
        chart.check().unwrap_or_else(|error| panic!("{name}: {error}"));
        let svg = chart.svg();
        assert!(svg.len() < MOST_BYTES, "{name}: {} bytes", svg.len());
        assert_eq!(svg, chart.svg(), "{name}: the same chart is the same bytes");
        let _ = write!(page, "<figure data-name=\"{name}\">{svg}</figure>");
    }
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("charts.html");
    std::fs::write(&path, page).unwrap();
    let mut measure = Python::prepare().script("pictures.py");
    measure.arg("--page").arg(&path).arg("--browser").arg(debian::browser());
    measure.arg("--pictures").arg(place::leavings().join("charts"));
    let said = String::from_utf8_lossy(&succeed(&mut measure).stdout).into_owned();
    assert!(said.contains(&format!("{} charts", 2 * charts.len())), "{said}");
}

#[test]
fn a_turntable_turns_in_a_browser_and_is_three_plots_without_scripts() {
    let (x, kilns) = tiles();
    let pca = principal_components(&x, Scaling::Correlation).unwrap();
    let html = turntable(&pca).groups(&kilns).html().unwrap();
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("turntable.html");
    let page = format!(
        "<!doctype html><html lang=\"en\"><meta charset=\"utf-8\"><title>T</title><body>{html}"
    );
    std::fs::write(&path, page).unwrap();
    let mut turn = Python::prepare().script("turn.py");
    turn.arg("--page").arg(&path).arg("--browser").arg(debian::browser());
    turn.arg("--pictures").arg(place::leavings().join("charts"));
    let said = String::from_utf8_lossy(&succeed(&mut turn).stdout).into_owned();
    assert!(said.contains("turned"), "{said}");
}

#[test]
fn twenty_thousand_units_and_more_stay_small() {
    for n in [1_000, 20_000, 25_000] {
        let x = DataMatrix::from_unnamed(mixture(n, 6)).unwrap();
        let groups: Vec<String> = (0..n).map(|unit| format!("kiln {}", unit % 3)).collect();
        for (name, chart) in charts_of("many", &x, &groups) {
            let svg = chart.svg();
            assert!(svg.len() < MOST_BYTES, "{name} of {n}: {} bytes", svg.len());
        }
    }
}
