//! `semiaxis record`, `verify`, `check` and values for a run, with the real engine: each promise kept on
//! a notebook of this file, and each way in which the world can spoil it.

use std::fs;
use std::os::unix::fs::PermissionsExt;
use std::path::{Path, PathBuf};
use std::process::{Command, Output};

use semiaxis_tests::client::kernel_executable;
use semiaxis_tests::command::{in_own_mounts, notebook, semiaxis, stderr, stdout};
use semiaxis_tests::folder::Folder;
use semiaxis_tests::python::{Python, succeed};
use semiaxis_tests::{debian, place};
use serde_json::{Value, json};

/// Six tiles, invented.
const TILES: &str = "tile,length,width,mass\na,410.2,251.1,3.10\nb,408.9,250.4,3.02\n\
    c,411.7,252.0,3.21\nd,409.5,250.2,3.05\ne,412.3,252.8,3.24\nf,407.8,249.9,2.98\n";

fn call(command: &str, path: &Path, more: &[&str]) -> Output {
    semiaxis([command, path.to_str().unwrap()]).args(more).output().unwrap()
}

/// Makes a record and gives its path.
fn recorded(folder: &Folder, name: &str, cells: &[(&str, &str)], more: &[&str]) -> PathBuf {
    let path = folder.put(&format!("{name}.ipynb"), cells);
    let output = call("record", &path, more);
    assert!(output.status.success(), "{}\n{}", stdout(&output), stderr(&output));
    folder.path(format!("{name}.record.html"))
}

/// The manifest of a record.
fn manifest(record: &Path) -> Value {
    part(&fs::read_to_string(record).unwrap(), "manifest")
}

fn part(text: &str, name: &str) -> Value {
    let opening = format!("<script type=\"application/json\" id=\"semiaxis-{name}\">");
    let start = text.find(&opening).unwrap() + opening.len();
    serde_json::from_str(&text[start..start + text[start..].find("</script>").unwrap()]).unwrap()
}

const ANALYSIS: [(&str, &str); 6] = [
    ("markdown", "# Tiles & \\<kilns>\n\nThe variance is $\\sigma^2$.\n\n## What was read"),
    ("code", "let tiles = read_table(\"tiles.csv\")?;\ntiles"),
    (
        "code",
        "let x = tiles.data_matrix()?;\nlet pca = principal_components(&x, Scaling::Correlation)?;",
    ),
    ("code", "println!(\"{} variables\", x.n_cols());\neprintln!(\"careful\");\npca"),
    ("code", "scree(&pca)"),
    ("code", "// </script><script>alert(1)</script>\nlet t = \"</main>\";\nt.len()"),
];

#[test]
fn a_record_holds_everything_and_is_verified_as_it_is() {
    let folder = Folder::with_tiles(TILES);
    let record = recorded(&folder, "kilns", &ANALYSIS, &[]);
    let text = fs::read_to_string(&record).unwrap();
    assert!(text.contains("<h1>Tiles &amp; &lt;kilns&gt;</h1>") && text.contains("<msup>"));
    assert!(!text.contains("<script>alert") && text.matches("</script>").count() == 3);
    assert!(text.contains("src=\"data:image/svg+xml;base64,") && text.contains("semiaxis-table"));

    let manifest = manifest(&record);
    // The digest by another program.
    let sums = succeed(Command::new("sha256sum").arg(folder.path("tiles.csv")));
    let sum = String::from_utf8_lossy(&sums.stdout)[..64].to_owned();
    let expected = json!([{"path": "tiles.csv", "bytes": TILES.len(), "sha256": sum, "rows": 6,
        "columns": 4, "cells": [2], "made_here": false}]);
    assert_eq!(manifest["files_read"], expected);
    assert!(text.matches(&sum).count() >= 2, "for people and for programs");
    assert!(manifest["build"]["compiler"].as_str().unwrap().starts_with("rustc 1."));
    assert!(manifest["build"]["crates"].as_array().unwrap().len() > 100);
    assert!(manifest["host"]["processor"].is_string() && manifest["host"]["system"].is_string());
    assert_eq!(manifest["cells"][2]["warnings"], json!(["careful"]));
    assert!(manifest["cells"][2]["run_ms"].as_f64().unwrap() > 0.0);
    assert_eq!(manifest["cells"].as_array().unwrap().len(), 5);
    let outputs = part(&text, "outputs");
    let numbers = &outputs["cells"]["5"]["exhibits"][0]["numbers"];
    assert!(numbers.is_object(), "the numbers behind the chart: {numbers}");
    let held = part(&text, "notebook");
    assert_eq!(held["cells"][1]["source"], ANALYSIS[1].1, "the notebook as it was");

    let verified = call("verify", &record, &[]);
    let said = stdout(&verified);
    assert_eq!(verified.status.code(), Some(0), "{said}{}", stderr(&verified));
    assert!(said.contains("5 of 5 cells same") && said.contains("not altered"), "{said}");
    assert!(!said.contains("another build"), "{said}");
}

/// A record with some of its evidence replaced, and sealed again as an honest program would have: what
/// another machine or another build might have written.
fn resealed(record: &Path, change: impl Fn(&mut Value, &mut Value)) -> PathBuf {
    const SCRIPT: &str = "
import hashlib, json, re, sys
path, parts = sys.argv[1], json.load(open(sys.argv[2]))
text = open(path, encoding='utf-8').read()
sha = lambda t: hashlib.sha256(t.encode()).hexdigest()
held = lambda name: re.search('id=\"semiaxis-%s\">(.*?)</script>' % name, text, re.S).group(1)
dump = lambda v: json.dumps(v).replace('<', '\\\\u003c').replace('>', '\\\\u003e').replace('&', '\\\\u0026')
old = sha(held('manifest'))
outputs = dump(parts['outputs'])
text = text.replace(held('outputs'), outputs).replace(held('manifest'), '@@').replace(old, '0' * 64)
manifest = parts['manifest']
manifest['digests']['outputs'] = sha(outputs)
manifest['digests']['page'] = sha(text.replace('@@', ''))
manifest = dump(manifest)
head, body = text.split('@@')
digest = sha(manifest)
mark = 'semiaxis-manifest-sha256\" content=\"'
head = head.replace(mark + '0' * 64, mark + digest).replace('manifest: ' + '0' * 64, 'manifest: ' + digest)
open(path, 'w', encoding='utf-8').write(head + manifest + body)
";
    let text = fs::read_to_string(record).unwrap();
    let (mut manifest, mut outputs) = (part(&text, "manifest"), part(&text, "outputs"));
    change(&mut manifest, &mut outputs);
    let changed = record.with_file_name("changed.record.html");
    fs::write(&changed, text).unwrap();
    let parts = record.with_file_name("parts.json");
    fs::write(&parts, json!({"manifest": manifest, "outputs": outputs}).to_string()).unwrap();
    succeed(Command::new("python3").args(["-c", SCRIPT]).arg(&changed).arg(parts));
    changed
}

#[test]
fn what_differs_is_told_with_both_values_and_by_the_tolerance() {
    let folder = Folder::with_tiles(TILES);
    let record = recorded(&folder, "kilns", &ANALYSIS, &[]);
    let changed = resealed(&record, |_, outputs| {
        outputs["cells"]["4"]["stdout"]["text"] = json!("4 variables\n");
        let values = &mut outputs["cells"]["2"]["exhibits"][0]["numbers"]["columns"][2]["values"];
        assert!(values.is_array(), "{values}");
        values[0] = json!("999");
    });
    let output = call("verify", &changed, &[]);
    let said = stdout(&output);
    assert_eq!(output.status.code(), Some(1), "{said}{}", stderr(&output));
    assert!(
        said.contains(
            "cell 4: different: standard output, line 1: \"4 variables\" then, \"3 variables\" now"
        ),
        "{said}"
    );
    assert!(
        said.contains("cell 2: different: exhibit 1") && said.contains("\"999\" then"),
        "{said}"
    );
    assert!(said.contains("cell 3: same") && said.contains("cell 5: same"), "{said}");

    // A number of a chart moved by a hundred-millionth: more than the usual tolerance, less than another.
    let moved = resealed(&record, |_, outputs| {
        fn first(value: &mut Value) -> Option<&mut Value> {
            match value {
                Value::Number(number) if number.is_f64() => Some(value),
                Value::Array(items) => items.iter_mut().find_map(first),
                Value::Object(map) => map.values_mut().find_map(first),
                _ => None,
            }
        }
        let number = first(&mut outputs["cells"]["5"]["exhibits"][0]["numbers"]).unwrap();
        *number = json!(number.as_f64().unwrap() * (1.0 + 1e-8));
    });
    let output = call("verify", &moved, &[]);
    assert_eq!(output.status.code(), Some(1), "{}", stdout(&output));
    assert!(stdout(&output).contains("cell 5: different"), "{}", stdout(&output));
    let output = call("verify", &moved, &["--tolerance", "1e-6"]);
    assert_eq!(output.status.code(), Some(0), "{}", stdout(&output));
    let output = call("verify", &moved, &["--tolerance", "2"]);
    assert_eq!(output.status.code(), Some(2));
    assert!(stderr(&output).contains("a number from 0 to 1"), "{}", stderr(&output));

    // Another build is stated, and the record is run.
    let other = resealed(&record, |manifest, _| {
        manifest["build"]["prelude"] = json!("0123");
        manifest["build"]["crates"][0][1] = json!("0.0.0");
    });
    let output = call("verify", &other, &[]);
    assert_eq!(output.status.code(), Some(0), "{}", stdout(&output));
    let said = stdout(&output);
    assert!(said.contains("another build: build of the prelude: 0123 then"), "{said}");
    assert!(said.contains("another build: crate ") && said.contains("0.0.0 then"), "{said}");
}

#[test]
fn data_that_moved_changed_or_went_are_told_and_what_needs_them_does_not_run() {
    let folder = Folder::with_tiles(TILES);
    let cells = [ANALYSIS[1], ANALYSIS[2], ("code", "let own = 6 * 7;\nown"), ("code", "own + 1")];
    let record = recorded(&folder, "kilns", &cells, &[]);
    let elsewhere = tempfile::tempdir().unwrap();
    let copy = elsewhere.path().join("kilns.record.html");
    fs::copy(&record, &copy).unwrap();

    // Moved and renamed: found by its digest.
    let data = elsewhere.path().join("deep/folder of data");
    fs::create_dir_all(&data).unwrap();
    fs::copy(folder.path("tiles.csv"), data.join("what \"it\" é is.txt")).unwrap();
    let output = call("verify", &copy, &["--data", data.to_str().unwrap()]);
    assert_eq!(output.status.code(), Some(0), "{}{}", stdout(&output), stderr(&output));

    // Changed: named, and not used.
    fs::remove_dir_all(&data).unwrap();
    fs::write(elsewhere.path().join("tiles.csv"), TILES.replace("410.2", "410.3")).unwrap();
    let output = call("verify", &copy, &[]);
    let said = stdout(&output);
    assert_eq!(output.status.code(), Some(2), "{said}");
    assert!(said.contains("tiles.csv has its name and other content"), "{said}");
    assert!(said.contains("cell 1: could not run: the file tiles.csv"), "{said}");
    assert!(said.contains("cell 2: could not run: it uses `tiles` of cell 1"), "{said}");
    assert!(said.contains("cell 3: same") && said.contains("cell 4: same"), "{said}");

    // Missing.
    fs::remove_file(elsewhere.path().join("tiles.csv")).unwrap();
    let output = call("verify", &copy, &[]);
    assert_eq!(output.status.code(), Some(2));
    assert!(stdout(&output).contains("was not found\n"), "{}", stdout(&output));
    assert!(stdout(&output).contains("2 of 4 cells same"), "{}", stdout(&output));
}

#[test]
fn a_record_that_was_altered_cut_short_or_is_of_another_time_is_refused() {
    let folder = Folder::with_tiles(TILES);
    let record = recorded(&folder, "one", &[("code", "let one = 1;\none")], &[]);
    let bytes = fs::read(&record).unwrap();
    let refused = |bytes: &[u8]| {
        let path = folder.path("damaged.html");
        fs::write(&path, bytes).unwrap();
        let output = call("verify", &path, &[]);
        assert_eq!(output.status.code(), Some(2), "{}", stdout(&output));
        assert!(!stdout(&output).contains("cell 1"), "nothing of it is run");
        stderr(&output)
    };
    // One byte at a time, spread over the file: page, styles, every part for programs.
    for at in (5..bytes.len()).step_by(bytes.len() / 40) {
        let mut damaged = bytes.clone();
        damaged[at] ^= 1;
        let said = refused(&damaged);
        assert!(said.contains("altered") || said.contains("cut short"), "byte {at}: {said}");
    }
    assert!(refused(&bytes[..bytes.len() - 1]).contains("cut short"));
    assert!(refused(&bytes[..bytes.len() / 2]).contains("cut short"));
    assert!(refused(&bytes[..10]).contains("is not a record"));
    let later = String::from_utf8(bytes).unwrap().replace("{\"format\":1,", "{\"format\":2,");
    let said = refused(later.as_bytes());
    assert!(said.contains("a record of format 2, and this version reads up to format 1"), "{said}");
    let output = call("verify", &folder.path("none.html"), &[]);
    assert!(stderr(&output).contains("there is no record at"), "{}", stderr(&output));
}

#[test]
fn a_failed_cell_makes_no_record_unless_it_was_asked_for() {
    let folder = Folder::with_tiles(TILES);
    let cells = [
        ("code", "let a = 1;"),
        ("code", "let none: Option<u8> = None;\nnone.unwrap()"),
        ("code", "a + 1"),
    ];
    let path = folder.put("broken.ipynb", &cells);
    let record = folder.path("broken.record.html");
    let output = call("record", &path, &[]);
    assert_eq!(output.status.code(), Some(1));
    assert!(stderr(&output).contains("no record was written"), "{}", stderr(&output));
    assert!(!record.exists());

    let output = call("record", &path, &["--with-errors"]);
    assert_eq!(output.status.code(), Some(1), "{}", stderr(&output));
    let text = fs::read_to_string(&record).unwrap();
    let first_page = &text[..text.find("<main>").unwrap()];
    assert!(first_page.contains("This record has errors") && first_page.contains("#cell-2"));
    assert_eq!(manifest(&record)["failed"], true);
    assert_eq!(manifest(&record)["cells"][2]["outcome"], "done", "the run went on");
    let output = call("verify", &record, &[]);
    assert_eq!(output.status.code(), Some(0), "it fails again: {}", stdout(&output));
}

#[test]
fn values_are_set_shown_and_used_again_by_verify() {
    let folder = Folder::with_tiles(TILES);
    let cells = [
        ("parameters", "let n_draws = 10;\nlet kiln = \"north\";"),
        ("code", "println!(\"{n_draws} {kiln}\");"),
    ];
    let path = folder.put("set.ipynb", &cells);
    let set = ["--set", "n_draws=3", "--set", "kiln=mill \"<b>\""];
    let output = call("record", &path, &set);
    assert!(output.status.success(), "{}", stderr(&output));
    let record = folder.path("set.record.html");
    let text = fs::read_to_string(&record).unwrap();
    assert!(text.contains("3 mill &quot;&lt;b&gt;&quot;"), "the output");
    assert!(text.contains("<code>n_draws = 3</code> instead of <code>10</code>"));
    assert_eq!(
        manifest(&record)["set"][0],
        json!({"name": "n_draws", "value": "3", "instead_of": "10"})
    );
    assert_eq!(part(&text, "notebook")["cells"][0]["source"], cells[0].1);
    let output = call("verify", &record, &[]);
    assert_eq!(output.status.code(), Some(0), "{}", stdout(&output));

    let output = call("run", &path, &set[..2]);
    assert!(output.status.success(), "{}", stderr(&output));
    let executed = fs::read_to_string(folder.path("set.executed.ipynb")).unwrap();
    assert!(executed.contains("3 north"), "{executed}");
    for command in ["run", "record"] {
        let output = call(command, &path, &["--set", "n_draws=few"]);
        assert_eq!(output.status.code(), Some(2));
        let said = stderr(&output);
        assert!(
            said.contains("`n_draws` is declared as a whole number, and \"few\" is none"),
            "{said}"
        );
    }
}

#[test]
fn files_that_a_notebook_reads_by_other_means_and_writes_are_listed() {
    let folder = Folder::with_tiles(TILES);
    fs::write(folder.path("a \"b\" é.txt"), "seven").unwrap();
    let cells = [
        ("code", "let text = std::fs::read_to_string(\"a \\\"b\\\" é.txt\")?;\ntext"),
        ("code", "std::fs::write(\"out <x>.txt\", \"written\")?;"),
        ("code", "std::fs::read_to_string(\"out <x>.txt\")?"),
        (
            "code",
            "std::fs::create_dir_all(\"charts\")?;\nstd::fs::File::create(\"charts/deep.txt\")?;",
        ),
    ];
    let record = recorded(&folder, "files é \"q\" '1'", &cells, &[]);
    let manifest = manifest(&record);
    let names = |key: &str| -> Vec<String> {
        let files = manifest[key].as_array().unwrap();
        files.iter().map(|file| file["path"].as_str().unwrap().to_owned()).collect()
    };
    assert_eq!(names("files_read"), ["a \"b\" é.txt", "out <x>.txt"], "{manifest}");
    assert_eq!(names("files_written"), ["charts/deep.txt", "out <x>.txt"]);
    assert_eq!(manifest["files_read"][1]["made_here"], true);
    let text = fs::read_to_string(&record).unwrap();
    assert!(text.contains("out &lt;x&gt;.txt"));
    // What it wrote itself is not asked for.
    fs::remove_file(folder.path("out <x>.txt")).unwrap();
    let output = call("verify", &record, &[]);
    assert_eq!(output.status.code(), Some(0), "{}{}", stdout(&output), stderr(&output));
    assert!(!folder.path("out <x>.txt").exists(), "verifying writes nothing beside the record");
}

#[test]
fn a_hundred_megabytes_of_output_make_a_record_that_opens() {
    let folder = Folder::with_tiles(TILES);
    let cells = [("code", "for _ in 0..1000 { println!(\"{}\", \"x\".repeat(100_000)); }")];
    let record = recorded(&folder, "loud", &cells, &[]);
    let size = fs::metadata(&record).unwrap().len();
    assert!(size < 1_000_000, "{size} bytes");
    let whole =
        &part(&fs::read_to_string(&record).unwrap(), "outputs")["cells"]["1"]["stdout"]["whole"];
    assert_eq!(whole[0], 100_001_000);
    let output = call("verify", &record, &[]);
    assert_eq!(output.status.code(), Some(0), "{}", stdout(&output));
}

#[test]
fn a_full_disk_keeps_the_old_record_and_a_folder_that_cannot_be_written_sends_it_elsewhere() {
    let folder = Folder::with_tiles(TILES);
    let path = folder.put("one.ipynb", &[("code", "1 + 1")]);
    let disk = folder.path("disk");
    fs::create_dir(&disk).unwrap();
    let script = "mount -t tmpfs -o size=16k tmpfs \"$1\"; echo old > \"$1/out.html\"\n\
        status=0; \"$2\" record \"$3\" --output \"$1/out.html\" || status=$?\n\
        cat \"$1/out.html\"; ls -A \"$1\"; exit $status";
    let output = in_own_mounts(script, &[&disk, kernel_executable(), &path]).output().unwrap();
    assert_eq!(output.status.code(), Some(2), "{}", stderr(&output));
    assert!(stderr(&output).contains("no space left on the disk"), "{}", stderr(&output));
    assert_eq!(stdout(&output), "old\nout.html\n", "the old file, and nothing beside it");

    let here = folder.path("here");
    fs::create_dir(&here).unwrap();
    let script = "mount -t tmpfs tmpfs \"$1\"; cp \"$3\" \"$1\"; mount -o remount,ro \"$1\"; cd \"$4\"\n\
        \"$2\" record \"$1/one.ipynb\"";
    let arguments: [&Path; 4] = [&disk, kernel_executable(), &path, &here];
    let output = in_own_mounts(script, &arguments).output().unwrap();
    assert_eq!(output.status.code(), Some(0), "{}", stderr(&output));
    assert!(here.join("one.record.html").exists());
}

#[test]
fn what_was_saved_and_does_not_come_from_a_straight_run_is_told() {
    let folder = Folder::with_tiles(TILES);
    let mut saved = notebook(&[("code", "let y = 1;"), ("code", "y + z"), ("code", "let z = 5;")]);
    for (idx, count) in [(0, 4), (1, 6), (2, 5)] {
        saved["cells"][idx]["execution_count"] = json!(count);
    }
    let path = folder.path("saved.ipynb");
    fs::write(&path, saved.to_string()).unwrap();
    let before = fs::read(&path).unwrap();
    let output = call("check", &path, &[]);
    assert_eq!(output.status.code(), Some(1));
    let said = stdout(&output);
    assert!(said.contains("cell 2 uses `z`, which is first defined in cell 3, below it"), "{said}");
    assert!(
        said.contains("cell 3 was run as [5], before cell 2 above it, which was run as [6]"),
        "{said}"
    );
    assert_eq!(fs::read(&path).unwrap(), before);

    let mut straight = notebook(&[("code", "let y = 1;\ny"), ("code", "y + 1")]);
    for (idx, shown) in [(0, "1"), (1, "7")] {
        straight["cells"][idx]["execution_count"] = json!(idx + 1);
        straight["cells"][idx]["outputs"] = json!([{"output_type": "execute_result", "metadata": {},
            "execution_count": idx + 1, "data": {"text/plain": shown}}]);
    }
    fs::write(&path, straight.to_string()).unwrap();
    let output = call("check", &path, &[]);
    assert_eq!(output.status.code(), Some(0), "{}", stdout(&output));
    // Its order is right, its second result is not what it gives.
    let output = call("record", &path, &[]);
    assert!(output.status.success(), "{}", stderr(&output));
    let said = stdout(&output);
    assert!(
        said.contains("cell 2 showed something else, exhibit 1, line 1: \"7\" then, \"2\" now"),
        "{said}"
    );
    let text = fs::read_to_string(folder.path("saved.record.html")).unwrap();
    assert!(
        text.contains("The notebook as it was saved")
            && text.contains("cell 2 showed something else")
    );
    assert!(!text.contains("cell 1 showed something else"));
    let output = call("check", &folder.path("none.ipynb"), &[]);
    assert_eq!(output.status.code(), Some(2));
}

#[test]
fn the_record_of_the_demo_opens_in_a_browser_without_a_network_and_is_accessible() {
    let folder = Folder::with_tiles(TILES);
    let demo = place::workspace().join("notebooks-demo");
    for name in ["kilns.ipynb", "tiles.csv"] {
        fs::copy(demo.join(name), folder.path(name)).unwrap();
    }
    let path = folder.path("kilns.ipynb");
    let output = call("record", &path, &["--pdf"]);
    debian::browser();
    let output = if output.status.success() { output } else { call("record", &path, &["--pdf"]) };
    assert!(output.status.success(), "{}", stderr(&output));
    let record = folder.path("kilns.record.html");
    assert!(fs::metadata(&record).unwrap().len() < 2_000_000);
    let pdf = fs::read(folder.path("kilns.record.pdf")).unwrap();
    assert!(pdf.starts_with(b"%PDF-") && pdf.len() > 20_000, "{} bytes", pdf.len());
    assert_eq!(fs::metadata(&record).unwrap().permissions().mode() & 0o111, 0);

    let python = Python::prepare();
    let look = |record: &Path| {
        let mut look = python.script("record.py");
        look.arg("--record").arg(record).arg("--axe").arg(checker());
        look.arg("--browser").arg(debian::browser());
        look.arg("--picture").arg(place::leavings().join("record.png"));
        look.output().unwrap()
    };
    let seen = look(&record);
    assert!(seen.status.success(), "{}{}", stdout(&seen), stderr(&seen));
    let seen: Value = serde_json::from_str(&stdout(&seen)).unwrap();
    let demo: Value = serde_json::from_str(&fs::read_to_string(&path).unwrap()).unwrap();
    let is_code = |cell: &&Value| cell["cell_type"] == "code";
    let n_code = demo["cells"].as_array().unwrap().iter().filter(is_code).count();
    assert_eq!(seen["cells"], n_code);
    assert!(seen["tables"].as_u64().unwrap() >= 8, "{seen}");
    let drawn = seen["pictures"].as_array().unwrap();
    assert!(drawn.len() >= 4 && drawn.iter().all(|width| width.as_u64() > Some(0)), "{seen}");
    assert_eq!(seen["json"], true);

    // What the demo has not: failures, mathematics, pictures that are not there, values that were set.
    let cells = [
        (
            "markdown",
            "# Mixed\n\n$$\\bar{x} = \\frac{1}{n} \\quad \\begin{pmatrix} a & b \\end{pmatrix}$$\n\n\
            #### Deep\n\n![gone](gone.png) ![far](https://example.org/x.png)\n\n| a |\n|---|\n| 1 |\n\n- [x] done",
        ),
        ("parameters", "let n = 3;"),
        ("code", "let none: Option<u8> = None;\nnone.unwrap()"),
        ("code", "eprintln!(\"careful\"); println!(\"{}\", \"wide \".repeat(80)); n"),
    ];
    let mixed = folder.put("mixed.ipynb", &cells);
    let output = call("record", &mixed, &["--with-errors", "--set", "n=4"]);
    assert_eq!(output.status.code(), Some(1), "{}", stderr(&output));
    let mixed = look(&folder.path("mixed.record.html"));
    assert!(mixed.status.success(), "{}{}", stdout(&mixed), stderr(&mixed));
    let mixed: Value = serde_json::from_str(&stdout(&mixed)).unwrap();
    assert_eq!(mixed["maths"], 1, "{mixed}");

    // The check can fail: a page that loads something, has an error and a nameless picture.
    let text = fs::read_to_string(&record).unwrap();
    let worse =
        text.replace("</h1>", "</h1><img src=\"http://127.0.0.1:9/x.png\"><script>no()</script>");
    let worse_path = folder.path("worse.html");
    fs::write(&worse_path, worse).unwrap();
    let seen = look(&worse_path);
    assert!(!seen.status.success() && stderr(&seen).contains("image-alt"), "{}", stderr(&seen));
    assert!(stderr(&seen).contains("Content Security Policy"), "{}", stderr(&seen));

    let output = call("verify", &record, &[]);
    assert_eq!(output.status.code(), Some(0), "{}", stdout(&output));
}

/// The accessibility checker, installed on first use.
fn checker() -> PathBuf {
    const VERSION: &str = "4.14.1";
    let folder = place::target_dir().join("tests-node");
    let script = folder.join("node_modules/axe-core/axe.min.js");
    let made_for = folder.join("made-for.txt");
    if script.exists() && fs::read_to_string(&made_for).is_ok_and(|made| made == VERSION) {
        return script;
    }
    debian::need(&["npm", "--version"], &["npm"]);
    fs::create_dir_all(&folder).unwrap();
    let mut install = Command::new("npm");
    install.args(["install", "--no-audit", "--no-fund", "--prefix"]).arg(&folder);
    succeed(install.arg(format!("axe-core@{VERSION}")));
    fs::write(made_for, VERSION).unwrap();
    script
}
