//! How long charts take to draw, beside the usual plotting library of Python.
//!
//! ```text
//! cargo run --release -p semiaxis --example pictures [-- PYTHON]
//! ```
//!
//! PYTHON is an interpreter with numpy and matplotlib; without it only our own times are shown. Both
//! draw the charts of the gallery on the demo's tiles as SVG, from analyses made before; each time
//! is the median of repeated runs. Close everything else before believing any of it.

use std::path::Path;
use std::process::Command;
use std::time::Instant;

use semiaxis::prelude::*;

fn main() -> Result<()> {
    let tiles = Path::new(env!("CARGO_MANIFEST_DIR")).join("../notebooks-demo/tiles.csv");
    let table = read_table(&tiles)?.drop_nulls::<String>(None)?;
    let kilns: Vec<String> =
        table.column("kiln")?.str()?.iter().flatten().map(str::to_owned).collect();
    let x = table.data_matrix()?;
    let pca = principal_components(&x, Scaling::Correlation)?;
    let few = ["length_mm", "thickness_mm", "mass_g", "water_absorption_pct", "breaking_load_n"];
    let far = distances(&pca, 3)?;
    let statistics = t_squared_and_q(&pca, 3)?;
    let charts: Vec<(&str, Chart)> = vec![
        ("scree", scree(&pca)),
        ("scores", score_plot(&pca).groups(&kilns)),
        ("score matrix", score_matrix(&pca).groups(&kilns)),
        ("loadings", loading_plot(&pca)),
        ("loading bars", loading_bars(&pca)),
        ("biplot", biplot(&pca).groups(&kilns)),
        ("correlation map", correlation_map(&x)),
        ("pairs", pairs(&x.select(few)?).groups(&kilns)),
        ("profiles", profiles(&x).groups(&kilns)),
        ("distances", distance_plot(&far).groups(&kilns)),
        ("sequence", sequence_plot(&statistics)),
    ];
    println!("charts of {} tiles as SVG, milliseconds, median", x.n_rows());
    let mut total = 0.0;
    for (name, chart) in &charts {
        let mut times: Vec<f64> = (0..15)
            .map(|_| {
                let start = Instant::now();
                std::hint::black_box(chart.svg());
                start.elapsed().as_secs_f64() * 1e3
            })
            .collect();
        times.sort_by(f64::total_cmp);
        total += times[7];
        println!("{name:>16}  {:>8.2}", times[7]);
    }
    println!("{:>16}  {total:>8.2}", "all");
    if let Some(python) = std::env::args().nth(1) {
        let script = concat!(env!("CARGO_MANIFEST_DIR"), "/examples/pictures.py");
        let output = Command::new(python).arg(script).arg(&tiles).output()?;
        let said = String::from_utf8_lossy(&output.stdout);
        assert!(output.status.success(), "{}", String::from_utf8_lossy(&output.stderr));
        print!("{said}");
        let peer: f64 = said.split_whitespace().last().and_then(|t| t.parse().ok()).unwrap_or(0.0);
        println!("{:>16}  {:>8.3}", "ratio", total / peer);
    }
    Ok(())
}
