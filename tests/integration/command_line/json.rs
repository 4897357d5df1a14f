//! `--format json`: the keys of every kind, numbers at full precision, places of errors.

use std::fs;

use serde_json::Value as Json;

use super::{finish, folder, json, program, script};

fn keys(object: &Json) -> Vec<&str> {
    object.as_object().unwrap_or_else(|| panic!("{object}")).keys().map(String::as_str).collect()
}

fn outputs(name: &str, text: &str) -> Vec<Json> {
    let (json, code) = json(name, text);
    assert_eq!(code, Some(0), "{json:#}");
    json["outputs"].as_array().unwrap().clone()
}

fn numbers(list: &Json) -> Vec<Option<f64>> {
    list.as_array().unwrap().iter().map(Json::as_f64).collect()
}

const FIRST: [&str; 4] = ["cell", "expression", "kind", "fingerprint"];

/// The keys after the four that every output has.
fn rest(output: &Json) -> Vec<&str> {
    let keys = keys(output);
    assert_eq!(keys[..4], FIRST);
    keys[4..].to_vec()
}

#[test]
fn a_run_has_a_format_its_inputs_and_its_outputs() {
    let folder = folder("json-inputs");
    fs::write(folder.join("a.csv"), "year,value\n1850,1\n1851,2\n").unwrap();
    fs::write(folder.join("s.rhy"), "load(\"a.csv\", unit: \"ppm\")\n").unwrap();
    let run = finish(program().current_dir(&folder).args(["run", "s.rhy", "--format", "json"]));
    let json: Json = serde_json::from_str(&run.out).unwrap();
    assert_eq!(keys(&json), ["format", "inputs", "outputs"]);
    assert_eq!(json["format"], 1);
    assert_eq!(keys(&json["inputs"][0]), ["file", "sha256"]);
    assert_eq!(json["inputs"][0]["file"], "a.csv");
    // From `printf 'year,value\n1850,1\n1851,2\n' | sha256sum`.
    assert_eq!(
        json["inputs"][0]["sha256"],
        "98a4eea15ef3ed561aa2d8f24c06a85cadb137e697f01881833d8a26a007389c"
    );
    assert_eq!(json["outputs"].as_array().unwrap().len(), 1);
    let note = json["outputs"][0]["notes"].to_string();
    assert!(note.contains("steps"), "what a file's years were taken for is noted: {note}");
}

#[test]
fn a_number_has_unit_notes_nominal_and_where_uncertain_its_range() {
    let outputs = outputs(
        "json-scalars",
        "3 ± 1 W/m2\n2 W/m2\n1850 ± 2 CE\n21 ka\n5 yr\n5 ± 1 yr\n3\nx = 2 ± 1\nx - x\n44 BCE\n1850 CE\n",
    );
    let (certain, uncertain) =
        (vec!["unit", "notes", "nominal"], vec!["unit", "notes", "nominal", "median", "low", "high"]);
    for (output, kind, unit, number, keys) in [
        (&outputs[0], "quantity", "W/m2", 3.0, &uncertain),
        (&outputs[1], "quantity", "W/m2", 2.0, &certain),
        (&outputs[2], "instant", "year CE", 1850.0, &uncertain),
        // 1950 − 21000; ages are years CE, astronomical.
        (&outputs[3], "instant", "year CE", -19050.0, &certain),
        (&outputs[4], "duration", "yr", 5.0, &certain),
        (&outputs[5], "duration", "yr", 5.0, &uncertain),
        (&outputs[6], "quantity", "1", 3.0, &certain),
        (&outputs[7], "quantity", "1", 0.0, &uncertain),
        // BCE has no year zero, the axis does.
        (&outputs[8], "instant", "year CE", -43.0, &certain),
        (&outputs[9], "instant", "year CE", 1850.0, &certain),
    ] {
        assert_eq!(output["kind"], kind, "{output}");
        assert_eq!(output["unit"], unit, "{output}");
        assert_eq!(output["nominal"], number, "{output}");
        assert_eq!(output["cell"], 0);
        assert_eq!(&rest(output), keys, "{output}");
        assert_eq!(output["fingerprint"].as_str().unwrap().len(), 64);
    }
    assert!(outputs[0]["low"].as_f64() < outputs[0]["median"].as_f64());
    assert!(outputs[0]["median"].as_f64() < outputs[0]["high"].as_f64());
    for key in ["median", "low", "high"] {
        assert_eq!(outputs[7][key], 0.0, "shared draws");
    }
}

#[test]
fn a_series_has_its_time_and_a_list_of_numbers_with_null_for_a_gap() {
    let outputs = outputs(
        "json-series",
        "clock = 1850..1852 CE by 1 yr\nx = series([1, 2.5] W/m2, along: 1850..1851 CE by 1 yr)\n\
         x + constant(0.5 W/m2)\nconstant(1 ± 0.1 W/m2)\nx\nx + constant(1 ± 0.1 W/m2)\n",
    );
    assert_eq!(rest(&outputs[0]), ["unit", "notes", "time", "nominal"]);
    assert_eq!(rest(&outputs[1]), ["unit", "notes", "time", "nominal", "median", "low", "high"]);
    assert_eq!(outputs[0]["kind"], "series");
    assert_eq!(keys(&outputs[0]["time"]), ["axis", "kind", "values", "ends"]);
    assert_eq!(outputs[0]["time"]["axis"], "year CE");
    assert_eq!(outputs[0]["time"]["kind"], "steps");
    assert_eq!(numbers(&outputs[0]["time"]["values"]), [Some(1850.0), Some(1851.0), Some(1852.0)]);
    assert_eq!(numbers(&outputs[0]["time"]["ends"]), [Some(1851.0), Some(1852.0), Some(1853.0)]);
    assert_eq!(numbers(&outputs[0]["nominal"]), [Some(1.5), Some(3.0), None]);
    assert_eq!(numbers(&outputs[2]["nominal"]), [Some(1.0), Some(2.5)], "shown as it was given");
    for key in ["nominal", "median", "low", "high"] {
        let values = numbers(&outputs[3][key]);
        assert_eq!(values.len(), 3);
        assert!(values[1].is_some() && values[2].is_none(), "{key} {values:?}");
        assert!(outputs[3][key][2].is_null());
    }
    let note = outputs[0]["notes"][0].as_str().unwrap();
    assert!(note.starts_with("x:") && note.contains("gap"), "{note}");
}

#[test]
fn ages_are_years_ce_and_instants_have_no_ends() {
    let outputs =
        outputs("json-ages", "series([190, 265] ppm, at: [21 ka, 11 ka])\nsteps(3..0 ka by 1 kyr)\n");
    assert_eq!(keys(&outputs[0]["time"]), ["axis", "kind", "values"]);
    assert_eq!(outputs[0]["time"]["kind"], "instants");
    assert_eq!(numbers(&outputs[0]["time"]["values"]), [Some(-19050.0), Some(-9050.0)]);
    assert_eq!(numbers(&outputs[1]["time"]["values"]), [Some(-1050.0), Some(-50.0), Some(950.0)]);
    assert_eq!(numbers(&outputs[1]["time"]["ends"]), [Some(-50.0), Some(950.0), Some(1950.0)]);
}

#[test]
fn a_bundle_has_its_components_by_label_and_their_total() {
    let outputs = outputs(
        "json-bundle",
        "clock = 1850..1851 CE by 1 yr\ncompose(sun: constant(1 ± 0.1 W/m2), haze: constant(2 W/m2))\n",
    );
    let bundle = &outputs[0];
    assert_eq!(bundle["kind"], "bundle");
    assert_eq!(rest(bundle), ["unit", "notes", "components", "total"]);
    assert_eq!(keys(&bundle["components"]), ["sun", "haze"]);
    let (certain, uncertain) =
        (["unit", "time", "nominal"], ["unit", "time", "nominal", "median", "low", "high"]);
    assert_eq!(keys(&bundle["components"]["sun"]), uncertain);
    assert_eq!(keys(&bundle["components"]["haze"]), certain);
    assert_eq!(keys(&bundle["total"]), uncertain);
    assert_eq!(numbers(&bundle["total"]["nominal"]), [Some(3.0), Some(3.0)]);
}

#[test]
fn a_list_has_items_of_its_own_kinds() {
    let outputs = outputs("json-list", "[[1, 2 ± 1], \"a\", 5 yr, 1850 CE]\n[]\n");
    assert_eq!(rest(&outputs[0]), ["notes", "items"]);
    let items = outputs[0]["items"].as_array().unwrap();
    let kinds: Vec<&str> = items.iter().map(|item| item["kind"].as_str().unwrap()).collect();
    assert_eq!(kinds, ["list", "text", "duration", "instant"]);
    assert_eq!(keys(&items[0]["items"][0]), ["kind", "unit", "nominal"]);
    assert_eq!(keys(&items[0]["items"][1]), ["kind", "unit", "nominal", "median", "low", "high"]);
    assert_eq!(outputs[1]["items"].as_array().unwrap().len(), 0);
}

#[test]
fn models_and_tables_have_columns_and_rows() {
    let outputs = outputs(
        "json-tables",
        "two_layer()\ntable(series([1, 2.5] ppm, along: 1850..1851 CE by 1 yr))\ntwo_layer(feedback: 1.3 ± 0.2 W/m2/K)\n",
    );
    for (output, kind) in outputs.iter().zip(["model", "table", "model"]) {
        assert_eq!(output["kind"], kind);
        assert_eq!(rest(output), ["notes", "table"]);
        assert_eq!(keys(&output["table"])[..2], ["columns", "rows"]);
        let columns = output["table"]["columns"].as_array().unwrap();
        for column in columns {
            assert!(
                keys(column) == ["name", "unit"] || keys(column) == ["name"],
                "words have no unit: {column}"
            );
        }
        for row in output["table"]["rows"].as_array().unwrap() {
            assert_eq!(row.as_array().unwrap().len(), columns.len(), "{row}");
        }
    }
    let rows = &outputs[1]["table"]["rows"];
    assert_eq!(
        (rows[0][0].as_f64(), rows[0][1].as_f64(), rows[1][1].as_f64()),
        (Some(1850.0), Some(1.0), Some(2.5))
    );
    assert_eq!(outputs[1]["table"]["columns"][1]["unit"], "ppm");
    let feedback =
        outputs[2]["table"]["rows"].as_array().unwrap().iter().find(|row| row[0] == "feedback").unwrap();
    let column = |name: &str| {
        let columns = outputs[2]["table"]["columns"].as_array().unwrap();
        columns.iter().position(|column| column["name"] == name).unwrap_or_else(|| panic!("no column {name}"))
    };
    let (low, high) = (feedback[column("low")].as_f64().unwrap(), feedback[column("high")].as_f64().unwrap());
    assert!(low < 1.1 && high > 1.5, "the range of an uncertain parameter is 5–95 % of its members");
}

#[test]
fn an_attribution_begins_with_the_seven_columns_and_has_its_statistics() {
    let data = "x = series([0, 1, 2, 3, 4] W/m2, along: 1850..1854 CE by 1 yr)\n\
                y = series([0.1, 0.4, 1.1, 1.4, 2.1] degC, along: 1850..1854 CE by 1 yr)\n";
    let calls = "attribute(y, to: [x])\n\
                 attribute(y, to: [x], method: generalised_least_squares, noise: ar1(0.5, per: 1 yr))\n";
    let outputs = outputs("json-attribution", &format!("{data}{calls}"));
    for (output, rho) in outputs.iter().zip([None, Some(0.5)]) {
        assert_eq!(output["kind"], "attribution");
        assert_eq!(rest(output), ["unit", "notes", "table", "statistics"]);
        let names: Vec<&str> = output["table"]["columns"]
            .as_array()
            .unwrap()
            .iter()
            .map(|column| column["name"].as_str().unwrap())
            .collect();
        let first = ["driver", "coefficient", "standard_error", "t", "low", "high", "contribution"];
        assert_eq!(names[..7], first);
        let statistics = keys(&output["statistics"]);
        for key in ["n", "r_squared", "durbin_watson", "log_likelihood", "aic"] {
            assert!(statistics.contains(&key), "{key}");
        }
        assert_eq!(output["statistics"]["rho"].as_f64(), rho);
        assert_eq!(output["statistics"]["n"], 5);
    }
    // Least squares by hand: the slope is Sxy / Sxx = 5 / 10, R² is Sxy² / (Sxx Syy) = 25 / (10 · 2.548).
    let row = &outputs[0]["table"]["rows"][0];
    assert_eq!(row[0], "x");
    assert!((row[1].as_f64().unwrap() - 0.5).abs() < 1e-12);
    let r_squared = outputs[0]["statistics"]["r_squared"].as_f64().unwrap();
    assert!((r_squared - 25.0 / 25.48).abs() < 1e-12, "{r_squared}");
}

#[test]
fn spans_ranges_clocks_and_texts_say_what_they_are() {
    let outputs = outputs("json-others", "1850..1900 CE\n19..23 kyr\n1850..1851 CE by 1 yr\n\"words µ\"\n");
    assert_eq!((&outputs[0]["kind"], rest(&outputs[0])), (&Json::from("span"), vec!["notes", "time"]));
    assert_eq!(
        (&outputs[1]["kind"], rest(&outputs[1])),
        (&Json::from("range"), vec!["unit", "notes", "low", "high"])
    );
    assert_eq!((&outputs[2]["kind"], rest(&outputs[2])), (&Json::from("clock"), vec!["notes", "time"]));
    assert_eq!((&outputs[3]["kind"], rest(&outputs[3])), (&Json::from("text"), vec!["notes", "text"]));
    assert_eq!(outputs[3]["text"], "words µ");
    assert_eq!((outputs[1]["low"].as_f64(), outputs[1]["high"].as_f64()), (Some(19.0), Some(23.0)));
}

#[test]
fn numbers_come_back_as_the_same_bits() {
    // Numbers whose shortest decimal form needs all seventeen digits, or lies at the edge of the range.
    let texts = [
        "0.1",
        "1.7976931348623157e308",
        "5e-324",
        "2.2250738585072014e-308",
        "0.30000000000000004",
        "9007199254740993",
        "1e23",
        "123456789.12345679",
    ];
    let script: String = texts.iter().map(|text| format!("{text}\n")).collect();
    let outputs = outputs("json-bits", &script);
    for (output, text) in outputs.iter().zip(texts) {
        let expected: f64 = text.parse().unwrap();
        assert_eq!(output["nominal"].as_f64().unwrap().to_bits(), expected.to_bits(), "{text} {output}");
    }
    let third = self::outputs("json-third", "1 / 3\n0.1 + 0.2\n");
    assert_eq!(third[0]["nominal"].as_f64().unwrap().to_bits(), (1.0f64 / 3.0).to_bits());
    assert_eq!(third[1]["nominal"].as_f64().unwrap().to_bits(), (0.1f64 + 0.2).to_bits());
}

#[test]
fn what_is_no_number_is_null() {
    let outputs = outputs("json-null", "1 / 0\n0 / 0\n(0 - 1)^0.5\n1e200 * 1e200\n");
    for output in &outputs {
        assert!(output["nominal"].is_null(), "{output}");
    }
}

#[test]
fn errors_have_code_message_help_and_a_place_in_code_points() {
    let text = "# µ ± ° take two bytes each\n\
                x = 18 ± 4 µm + 1 degC\n\
                \"± µ °\"; 1\n";
    let (wrong, code) = json("json-syntax", text);
    assert_eq!(code, Some(1));
    let error = &wrong["outputs"][0]["error"];
    assert_eq!((error["line"].as_u64(), error["column"].as_u64()), (Some(3), Some(8)), "{error}");

    let text = "deg = \"± µ °\"\n[\"± µ °\", 1 µm + 1 degC]\n[\"±°\", nowhere]\n[\"𝛼±\", load(\"nein.csv\")]\n  constnt(1)\n";
    let (json, code) = json("json-errors", text);
    assert_eq!(code, Some(1));
    let outputs = json["outputs"].as_array().unwrap();
    let errors: Vec<&Json> = outputs.iter().map(|output| &output["error"]).collect();
    for output in outputs {
        assert_eq!(output["kind"], "error");
        assert_eq!(rest(output), ["error"]);
    }
    for error in &errors {
        let keys = keys(error);
        let expected = ["code", "message", "help", "cell", "line", "column"];
        assert!(keys == expected || keys == [&expected[..2], &expected[3..]].concat(), "{keys:?}");
        assert_eq!(error["cell"], 0);
        assert!(!error["message"].as_str().unwrap().contains('\x1b'));
    }
    let places: Vec<(&str, u64, u64)> = errors
        .iter()
        .map(|error| {
            (
                error["code"].as_str().unwrap(),
                error["line"].as_u64().unwrap(),
                error["column"].as_u64().unwrap(),
            )
        })
        .collect();
    assert_eq!(
        places,
        [
            ("unit-mismatch", 2, 11),
            ("not-defined", 3, 8),
            ("file-missing", 4, 13),
            ("unknown-function", 5, 3)
        ]
    );
}

#[test]
fn an_error_in_a_definition_comes_before_what_it_keeps_from_being_shown() {
    let (json, code) = json("json-definition", "x = 1 W/m2 + 1 degC\nx\n1 + 1\n");
    assert_eq!(code, Some(1));
    let kinds: Vec<&str> =
        json["outputs"].as_array().unwrap().iter().map(|output| output["kind"].as_str().unwrap()).collect();
    assert_eq!(kinds, ["error", "error", "quantity"]);
    assert_eq!(keys(&json["outputs"][0]), ["cell", "kind", "error"], "a definition is no shown expression");
    assert_eq!(json["outputs"][1]["expression"], "x");
    assert_eq!(json["outputs"][0]["error"], json["outputs"][1]["error"]);
}

#[test]
fn two_runs_give_the_same_bytes_and_text_shows_the_same_fingerprints() {
    let text = "x = 3 ± 1 W/m2\nx\nx * 2\n";
    let one = script("json-again", text, &["--format", "json"]);
    let two = script("json-again-there", text, &["--format", "json"]);
    assert_eq!(one.out, two.out);
    let shown = script("json-text", text, &[]);
    let json: Json = serde_json::from_str(&one.out).unwrap();
    for output in json["outputs"].as_array().unwrap() {
        assert!(shown.out.contains(&output["fingerprint"].as_str().unwrap()[..12]), "{}", shown.out);
    }
}
