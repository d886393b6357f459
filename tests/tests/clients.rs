//! The demo notebook in the clients that people use: an executing library, a converter, and an
//! editor in a browser. All must show what `semiaxis run` shows.

use std::io::Write as _;
use std::path::{Path, PathBuf};
use std::process::{Command, Stdio};
use std::sync::OnceLock;

use semiaxis_tests::client::kernel_executable;
use semiaxis_tests::python::{Python, succeed};
use semiaxis_tests::{debian, place};
use serde_json::{Map, Value};

const NOTEBOOK: &str = "kilns.ipynb";

/// The demo, copied out of the project, run without any client; and Python with the kernel
/// registered in it.
struct Demo {
    python: Python,
    folder: tempfile::TempDir,
}

impl Demo {
    /// Prepared once for all tests of this file.
    fn get() -> &'static Demo {
        static DEMO: OnceLock<Demo> = OnceLock::new();
        DEMO.get_or_init(|| {
            let folder = tempfile::tempdir().expect("a temporary folder");
            let source = place::workspace().join("notebooks-demo");
            for name in [NOTEBOOK, "tiles.csv"] {
                std::fs::copy(source.join(name), folder.path().join(name))
                    .unwrap_or_else(|e| panic!("{name} is part of the demo: {e}"));
            }
            let demo = Demo { python: Python::prepare(), folder };
            let mut run = Command::new(kernel_executable());
            run.arg("run").arg(demo.notebook()).arg("--output").arg(demo.executed());
            succeed(&mut run);
            let mut install = Command::new(kernel_executable());
            succeed(install.arg("install").arg("--prefix").arg(demo.python.folder()));
            demo
        })
    }

    fn notebook(&self) -> PathBuf {
        self.folder.path().join(NOTEBOOK)
    }

    /// The notebook as `semiaxis run` wrote it.
    fn executed(&self) -> PathBuf {
        self.folder.path().join("executed.ipynb")
    }
}

#[test]
fn the_demo_shows_the_same_through_a_client_library_as_from_the_command_line() {
    let demo = Demo::get();
    let by_client = demo.folder.path().join("by-client.ipynb");
    succeed(demo.python.script("execute.py").arg(demo.notebook()).arg(&by_client));

    let (ours, theirs) = (code_cells(&demo.executed()), code_cells(&by_client));
    assert_eq!(ours.len(), theirs.len());
    let (mut tables, mut charts) = (0, 0);
    for (cell_idx, (ours, theirs)) in ours.iter().zip(&theirs).enumerate() {
        assert_eq!(shown(ours), shown(theirs), "code cell {}", cell_idx + 1);
        assert_eq!(ours["execution_count"], theirs["execution_count"]);
        for output in shown(ours) {
            tables += usize::from(output.contains_key("text/html"));
            charts += usize::from(output.contains_key("image/svg+xml"));
        }
    }
    // The demo has eight cells that end in a table and four charts; fewer means that something
    // was not shown at all.
    assert!(tables >= 8 && charts >= 4, "{tables} tables and {charts} charts");
}

#[test]
fn the_executed_demo_is_a_valid_notebook_that_converts_to_a_page() {
    let demo = Demo::get();
    let validate = "import nbformat, sys; nbformat.validate(nbformat.read(sys.argv[1], 4))";
    succeed(demo.python.command(["-W", "error", "-c", validate]).arg(demo.executed()));

    let page = demo.folder.path().join("page.html");
    let mut convert = demo.python.command(["-m", "nbconvert", "--to", "html"]);
    succeed(convert.arg(demo.executed()).arg("--output").arg(&page));
    let page = std::fs::read_to_string(page).expect("the converter wrote the page");
    let charts: usize = code_cells(&demo.executed())
        .iter()
        .flat_map(shown)
        .filter(|output| output.contains_key("image/svg+xml"))
        .count();
    let drawn = page.matches("<svg").count() + page.matches("data:image/svg+xml").count();
    assert!(drawn >= charts, "{drawn} of {charts} charts are in the page");
    assert!(page.contains("<table"), "no table is in the page");
}

/// Every chart and table of the gallery, run, converted to a page and printed by a browser; then in
/// an editor whose theme is dark, as the demo is in one whose theme is light.
#[test]
fn the_gallery_is_printed_and_shows_the_same_in_a_dark_editor() {
    let demo = Demo::get();
    let gallery = demo.folder.path().join("gallery.ipynb");
    let source = place::workspace().join("notebooks-demo/gallery.ipynb");
    std::fs::copy(source, &gallery).expect("the gallery is part of the project");
    let executed = demo.folder.path().join("gallery-executed.ipynb");
    let mut run = Command::new(kernel_executable());
    succeed(run.arg("run").arg(&gallery).arg("--output").arg(&executed));
    let charts = code_cells(&executed)
        .iter()
        .flat_map(shown)
        .filter(|output| output.contains_key("image/svg+xml"))
        .count();
    assert!(charts >= 16, "{charts} charts in the gallery");

    let page = demo.folder.path().join("gallery.html");
    let mut convert = demo.python.command(["-m", "nbconvert", "--to", "html"]);
    succeed(convert.arg(&executed).arg("--output").arg(&page));
    let printed = place::leavings().join("gallery.pdf");
    let mut print = Command::new(debian::browser());
    print.args(["--headless", "--no-sandbox", "--disable-gpu", "--disable-dev-shm-usage"]);
    print.arg(format!("--user-data-dir={}", demo.folder.path().join("printer").display()));
    print.arg("--virtual-time-budget=5000");
    print.arg(format!("--print-to-pdf={}", printed.display()));
    succeed(print.arg(format!("file://{}", page.display())));
    let pdf = std::fs::read(&printed).expect("the browser printed the page");
    assert!(pdf.starts_with(b"%PDF-") && pdf.len() > 200_000, "{} bytes", pdf.len());

    let mut lab = demo.python.script("lab.py");
    lab.arg("--notebook").arg(&gallery).arg("--executed").arg(&executed);
    lab.arg("--browser").arg(debian::browser()).arg("--theme").arg("JupyterLab Dark");
    lab.arg("--pictures").arg(place::leavings().join("editor-dark"));
    let said = String::from_utf8_lossy(&succeed(&mut lab).stdout).into_owned();
    assert!(said.contains("charts in the page"), "{said}");
}

/// A client that shows text only: tables by their plain twin, charts by what they say in words.
#[test]
fn tables_and_charts_have_words_in_a_console() {
    let demo = Demo::get();
    let mut console = demo.python.command(["-m", "jupyter_console", "--simple-prompt"]);
    console.args(["--kernel", "semiaxis"]).current_dir(demo.folder.path());
    console.stdin(Stdio::piped()).stdout(Stdio::piped()).stderr(Stdio::piped());
    let mut console = console.spawn().expect("the console starts");
    let lines = "let t = read_table(\"tiles.csv\")?;\n\
                 let x = t.data_matrix_with(MatrixOptions::new().missing(Missing::DropRows))?;\n\
                 let pca = principal_components(&x, Scaling::Correlation)?;\n\
                 pca\nscree(&pca)\n";
    let mut input = console.stdin.take().expect("a piped input");
    input.write_all(lines.as_bytes()).expect("the console reads");
    drop(input);
    let output = console.wait_with_output().expect("the console ends when its input does");
    let said = String::from_utf8_lossy(&output.stdout);
    assert!(said.contains("Variance of each component"), "{said}");
    assert!(said.contains("component  variance   share  together"), "{said}");
    assert!(said.contains("Scree of 14 components from 314 units"), "{said}");
    assert!(!said.contains("<table") && !said.contains("<svg"), "{said}");
}

#[test]
fn the_demo_runs_in_an_editor_in_a_browser_and_shows_the_same() {
    let demo = Demo::get();
    let mut lab = demo.python.script("lab.py");
    lab.arg("--notebook").arg(demo.notebook()).arg("--executed").arg(demo.executed());
    lab.arg("--browser").arg(debian::browser());
    lab.arg("--pictures").arg(place::leavings().join("editor"));
    let output = succeed(&mut lab);
    let said = String::from_utf8_lossy(&output.stdout);
    assert!(said.contains("charts in the page"), "{said}");
}

#[test]
fn the_demo_concludes_what_an_independent_computation_concludes() {
    let text: String = code_cells(&Demo::get().executed())
        .iter()
        .flat_map(shown)
        .filter_map(|output| output.get("stdout").and_then(Value::as_str).map(str::to_owned))
        .collect();
    for expected in EXPECTED {
        assert!(text.contains(expected), "the demo does not say {expected:?}:\n{text}");
    }
}

/// Computed from the same table by `clients/demo_numbers.py` with numpy 2.4.6 on 2026-12-01, and
/// copied from its output.
const EXPECTED: [&str; 14] = [
    "length_mm                -0.13",
    "width_mm                 -0.29",
    "thickness_mm             -0.19",
    "mass_g                   -0.25",
    "warp_mm                   0.12",
    "bulk_density_g_cm3       -0.02",
    "modulus_of_rupture_mpa   -0.12",
    "the first component holds 89.1 % of the variance",
    "3 components stand out from noise and hold 85 % of the variance; the next one has 0.48",
    "the middle batch lies 1.30 from the centre; odd batches: Y09, M05",
    "without north            213 tiles   0.993  0.990  0.998",
    "without mill             206 tiles   0.985  0.986  0.998",
    "without yard             209 tiles   0.983  0.958  0.973",
    "without Y09 and M05      295 tiles   0.997  0.974  0.975",
];

/// The code cells of a notebook.
fn code_cells(path: &Path) -> Vec<Value> {
    let text = std::fs::read_to_string(path).unwrap_or_else(|e| panic!("{}: {e}", path.display()));
    let notebook: Value = serde_json::from_str(&text).expect("a notebook is JSON");
    let cells = notebook["cells"].as_array().expect("a notebook has cells");
    cells.iter().filter(|cell| cell["cell_type"] == "code").cloned().collect()
}

/// What a cell shows: one map for each output, of MIME types, or of a stream's name, to text.
/// Pieces of one stream are joined, since where one ends is a matter of timing.
fn shown(cell: &Value) -> Vec<Map<String, Value>> {
    let mut all: Vec<Map<String, Value>> = Vec::new();
    for output in cell["outputs"].as_array().expect("a code cell has outputs") {
        if output["output_type"] == "stream" {
            let name = output["name"].as_str().expect("a stream has a name").to_owned();
            let text = joined(&output["text"]);
            match all.last_mut().and_then(|last| last.get_mut(&name)) {
                Some(Value::String(before)) => before.push_str(&text),
                _ => all.push(Map::from_iter([(name, Value::String(text))])),
            }
            continue;
        }
        let forms = output["data"].as_object().unwrap_or_else(|| panic!("an error: {output}"));
        all.push(forms.iter().map(|(mime, text)| (mime.clone(), joined(text).into())).collect());
    }
    all
}

/// Text that a notebook may keep as one string or as a list of lines.
fn joined(text: &Value) -> String {
    match text {
        Value::String(text) => text.clone(),
        Value::Array(lines) => lines.iter().filter_map(Value::as_str).collect(),
        other => other.to_string(),
    }
}
