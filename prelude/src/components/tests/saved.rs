//! Analyses that are written and read back.

use proptest::prelude::*;

use super::weights::weighted_and_repeated;
use super::{BOTH, correlated};
use crate::components::{
    ComponentOptions, Decomposition, FittedComponents, PrincipalComponents, RandomisedOptions,
    Scaling, principal_components, principal_components_with,
};
use crate::error::Error;
use crate::table::DataMatrix;

fn analysis() -> PrincipalComponents {
    let x = DataMatrix::from_unnamed(correlated(20, 4, 5)).unwrap();
    principal_components(&x, Scaling::Correlation).unwrap()
}

fn randomised() -> PrincipalComponents {
    let x = DataMatrix::from_unnamed(correlated(60, 30, 5)).unwrap();
    let options = RandomisedOptions::new().seed(u64::MAX);
    let options = ComponentOptions::new(Scaling::Covariance)
        .keep(3)
        .decomposition(Decomposition::Randomised(options));
    principal_components_with(&x, options).unwrap()
}

#[test]
fn a_loaded_analysis_equals_the_saved_one_in_every_bit() {
    let weighted = weighted_and_repeated(25, 6, 3).0;
    let wide = DataMatrix::from_unnamed(correlated(7, 30, 3)).unwrap();
    let mut analyses = vec![randomised()];
    for scaling in BOTH {
        analyses.push(principal_components(&weighted, scaling).unwrap());
        analyses.push(principal_components(&wide, scaling).unwrap());
        let two = ComponentOptions::new(scaling).keep(2);
        analyses.push(principal_components_with(&wide, two).unwrap());
    }
    for pca in analyses {
        let back = FittedComponents::from_json(&pca.to_json()).unwrap();
        assert!(back == *pca.fitted(), "{:?}", pca.route());
        assert!(
            back.project(pca.data()).unwrap().values() == pca.project(pca.data()).unwrap().values()
        );
        assert!(matches!(back.saved_scores(), Err(Error::NotSaved { what: "scores", .. })));
        let with_scores = FittedComponents::from_json(&pca.to_json_with_scores()).unwrap();
        assert!(with_scores.saved_scores().unwrap() == pca.scores());
        // Saved again, nothing is lost or added.
        assert_eq!(with_scores.to_json(), pca.to_json_with_scores());
        assert_eq!(back.to_json(), pca.to_json());
    }
}

#[test]
fn files_are_whole_or_not_there() {
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("tiles.json");
    let pca = analysis();
    pca.save_with_scores(&path).unwrap();
    pca.save(&path).unwrap();
    assert!(PrincipalComponents::load(&path).unwrap() == *pca.fitted());
    let names: Vec<_> =
        std::fs::read_dir(folder.path()).unwrap().map(|e| e.unwrap().file_name()).collect();
    assert_eq!(names, ["tiles.json"], "nothing is left beside it");

    let nowhere = folder.path().join("no such folder").join("tiles.json");
    assert!(matches!(pca.save(&nowhere), Err(Error::Io { path: Some(_), .. })));
    // A folder in the file's place: the attempt fails and leaves nothing behind.
    let taken = folder.path().join("taken");
    std::fs::create_dir(&taken).unwrap();
    std::fs::write(taken.join("x"), "").unwrap();
    assert!(matches!(pca.save(&taken), Err(Error::Io { .. })));
    assert_eq!(std::fs::read_dir(folder.path()).unwrap().count(), 2);

    match PrincipalComponents::load(folder.path().join("tile.json")).unwrap_err() {
        Error::FileMissing { similar, .. } => assert_eq!(similar, ["tiles.json"]),
        other => panic!("{other}"),
    }
    std::fs::write(&path, "{\"format\": 3}").unwrap();
    match PrincipalComponents::load(&path).unwrap_err() {
        Error::SavedForm { part, found, .. } => {
            assert!(part.starts_with("`format` in ") && part.ends_with("tiles.json"), "{part}");
            assert_eq!(found, "3");
        }
        other => panic!("{other}"),
    }
    std::fs::write(&path, b"{\n\xff}").unwrap();
    assert!(matches!(
        PrincipalComponents::load(&path),
        Err(Error::NotText { line: 2, byte: 0xff, .. })
    ));
}

/// The part at fault when one piece of a saved analysis is replaced by another.
fn fault_of(text: &str, from: &str, to: &str) -> String {
    assert!(text.contains(from), "{from} is not in {text}");
    match FittedComponents::from_json(&text.replacen(from, to, 1)) {
        Err(Error::SavedForm { part, found, accepted }) => {
            assert!(!found.is_empty() && !accepted.is_empty());
            part
        }
        other => panic!("{from} -> {to}: {other:?}"),
    }
}

#[test]
fn what_is_not_known_missing_or_of_the_wrong_kind_is_refused_by_name() {
    let text = analysis().to_json();
    match FittedComponents::from_json(&text.replacen("\"version\": 1", "\"version\": 2", 1)) {
        Err(Error::SavedVersion { found: 2, known: 1, .. }) => {}
        other => panic!("{other:?}"),
    }
    // A later version is named as such even when its other fields are not known here.
    let later = "{\"format\": \"semiaxis components\", \"version\": 7, \"new\": 1}";
    assert!(matches!(
        FittedComponents::from_json(later),
        Err(Error::SavedVersion { found: 7, .. })
    ));
    let tolerance = serde_json::json!(analysis().tolerance()).to_string();
    for (from, to, part) in [
        ("semiaxis components", "semiaxis rotation", "`format`"),
        ("\"version\": 1", "\"version\": -1", "`version`"),
        ("\"version\": 1", "\"version\": \"1\"", "`version`"),
        ("\"weighted\": false", "\"weighted\": false, \"colour\": 1", "`colour`"),
        ("\"weighted\": false", "\"weighted\": false, \"rank\": 4", "`rank`"),
        ("  \"weighted\": false,\n", "", "`weighted`"),
        ("\"weighted\": false", "\"weighted\": 0", "`weighted`"),
        ("\"correlation\"", "\"robust\"", "`scaling`"),
        ("\"variable-cross-product\"", "\"by hand\"", "`route`"),
        ("\"variable-cross-product\"", "\"randomised\"", "`approximation`"),
        ("\"approximation\": null", "\"approximation\": {}", "`approximation`"),
        ("\"rows\": 20", "\"rows\": 1", "`rows`"),
        ("\"rows\": 20", "\"rows\": 2.5", "`rows`"),
        ("\"divisor\": 19", "\"divisor\": 20", "`divisor`"),
        ("\"rank\": 4", "\"rank\": 3", "`rank`"),
        ("\"rank\": 4", "\"rank\": 5", "`rank`"),
        ("\"rank_tolerance\": ", "\"rank_tolerance\": -", "`rank_tolerance`"),
        (&tolerance, "0.5", "`rank_tolerance`"),
        ("\"V2\"", "\"V1\"", "`variables`"),
        ("\"V2\"", "2", "`variables`"),
        ("\"V2\",", "", "`variances`"),
        ("\"transformations\": []", "\"transformations\": {}", "`transformations`"),
        (
            "\"transformations\": []",
            "\"transformations\": [3]",
            "`transformations[0]`: a transformation",
        ),
        (
            "\"transformations\": []",
            "\"transformations\": [{\"transformation\": \"cube\", \"columns\": [\"V1\"]}]",
            "`transformations[0]`: `transformation`",
        ),
        ("\"mean\": [", "\"mean\": [1.0,", "`mean`"),
        ("\"mean\": [", "\"mean\": [1e999,", "`mean`"),
        ("\"mean\": [", "\"mean\": [null,", "`mean`"),
        ("\"mean\": [", "\"mean\": [\"inf\",", "`mean`"),
        ("\"scale\": [", "\"scale\": [1.0,", "`scale`"),
        ("\"deviations\": [", "\"deviations\": [-", "`deviations`"),
        ("\"total_variance\": 4", "\"total_variance\": 5", "`total_variance`"),
        ("\"variances\": [", "\"variances\": [9", "`variances`"),
        ("\"variances\": [", "\"variances\": [0.1, ", "`variances`"),
        ("\"loadings\": [[", "\"loadings\": [[0", "the text"),
        ("\"loadings\": [[0.", "\"loadings\": [[0.1", "`loadings`"),
        ("\"loadings\": [[", "\"loadings\": [[0.5,", "`loadings[0]`"),
        ("\"loadings\": [[", "\"loadings\": [[\"\",", "`loadings[0]`"),
        ("\"loadings\": [", "\"loadings\": [[1.0],", "`loadings`"),
        ("\"scores\": null", "\"scores\": []", "`scores`"),
        ("\"scores\": null", "\"scores\": {\"labels\": []}", "`scores`: `values`"),
        (
            "\"scores\": null",
            "\"scores\": {\"labels\": [\"a\"], \"values\": []}",
            "`scores`: `labels`",
        ),
    ] {
        assert_eq!(fault_of(&text, from, to), part, "{from} -> {to}");
    }
    let deviations_only = text.replacen("\"deviations\": [", "\"deviations\": [1", 1);
    match FittedComponents::from_json(&deviations_only) {
        Err(Error::SavedForm { part, .. }) => assert_eq!(part, "`scale`"),
        other => panic!("{other:?}"),
    }
    let text = randomised().to_json();
    for (from, to, part) in [
        ("\"directions\":13", "\"directions\":2", "`approximation`: `directions`"),
        ("\"norm_bound\":", "\"norm_bound\":-", "`approximation`: `norm_bound`"),
        ("\"residuals\":[", "\"residuals\":[1,", "`approximation`: `residuals`"),
        (
            "\"seed\":18446744073709551615",
            "\"seed\":18446744073709551616",
            "`approximation`: `seed`",
        ),
        ("\"seed\"", "\"sed\"", "`approximation`: `seed`"),
    ] {
        assert_eq!(fault_of(&text, from, to), part, "{from} -> {to}");
    }
    for (text, found) in [("", "empty"), ("[1]", "a list"), ("xyz", "not JSON at line 1, column 1")]
    {
        match FittedComponents::from_json(text) {
            Err(Error::SavedForm { found: seen, .. }) => assert_eq!(seen, found),
            other => panic!("{other:?}"),
        }
    }
}

#[test]
fn a_text_cut_short_anywhere_is_refused() {
    let text = analysis().to_json_with_scores();
    for end in 0..text.len() {
        match FittedComponents::from_json(&text[..end]) {
            Err(Error::SavedForm { part, found, .. }) => {
                assert_eq!(part, "the text");
                assert!(found == "empty" || found.starts_with("cut short at line"), "{found}");
            }
            other => panic!("{end}: {other:?}"),
        }
    }
}

proptest! {
    #![proptest_config(ProptestConfig::with_cases(256))]

    #[test]
    fn a_damaged_text_is_an_analysis_or_an_error_and_never_a_panic(
        place in 0usize..2000, byte in 0x20u8..0x7f,
    ) {
        let mut bytes = analysis().to_json_with_scores().into_bytes();
        let place = place % bytes.len();
        bytes[place] = byte;
        let text = String::from_utf8(bytes).unwrap();
        if let Ok(fitted) = FittedComponents::from_json(&text) {
            prop_assert_eq!(fitted.n_components(), 4);
        }
    }
}
