//! `clockspar loads` as scripts see it: statuses, keys, cautions, what is told of a broken
//! rule.

use serde_json::Value;

use crate::commands::{clockspar, seen, with_input};

const LINE: &str = r#"
name = "test line"
reference = "tug"
[[node]]
name = "tug"
mass = "1 t"
[[node]]
name = "pod"
position = "-1 km"
mass = "100 kg"
rating = "1 g0"
[[span]]
along = ["tug", "pod"]
kind = "tether"
linear_density = "0.01 kg/m"
axial_stiffness = "1 MN"
strength = "1 kN"
safety_factor = 2
[[engine]]
node = "tug"
exhaust_speed = "30 km/s"
propellant = "400 kg"
[[phase]]
ramp = ["0 g0", "0.1 g0"]
for = "1 min"
[[phase]]
hold = "0.1 g0"
for = "1 h"
[[phase]]
ramp = ["0.1 g0", "0 g0"]
for = "1 min"
"#;

fn loads(text: &str, more: &[&str]) -> (i32, String, String) {
    let mut arguments = vec!["loads", "-"];
    arguments.extend(more);
    seen(&with_input(&arguments, text))
}

fn json(text: &str) -> (i32, Value) {
    let (status, stdout, _) = loads(text, &["--as", "json"]);
    (status, serde_json::from_str(&stdout).expect("one object"))
}

/// The sentence that tells of a broken rule, one blank for each break of the page.
fn told(stdout: &str, rule: &str) -> String {
    let whole = stdout.split_whitespace().collect::<Vec<_>>().join(" ");
    let start = whole.find(rule).unwrap_or_else(|| panic!("{rule} is not told:\n{stdout}"));
    whole[start..].to_owned()
}

#[test]
fn the_tables_have_their_keys() {
    let (status, object) = json(LINE);
    assert_eq!(status, 0);
    assert_eq!(object["schema"], "clockspar.loads/1");
    let keys = |table: &str| {
        let row = object[table][0].as_object().expect("a row");
        let mut keys: Vec<&str> =
            row.keys().map(String::as_str).filter(|key| !key.ends_with("_why")).collect();
        keys.sort_unstable();
        keys.join(" ")
    };
    assert_eq!(keys("nodes"), "acceleration_m_s2 loaded_position_m node rating_m_s2");
    assert_eq!(
        keys("spans"),
        "force_aft_n force_fore_n from margin peak_at_s peak_n strength_n stretch_m to"
    );
    assert_eq!(
        keys("engines"),
        "exhaust_speed_m_s force_n mass_ratio node propellant_left_kg propellant_used_kg"
    );
    assert_eq!(object["nodes"][0]["rating_m_s2_why"], "no rating is given");
    assert_eq!(object["broken"], serde_json::json!([]));
    assert!(object["caution"].as_str().expect("a caution").contains("range-safety"));
    for (key, low, high) in [
        ("line_mass_kg", 1422.31, 1422.32),
        ("lowest_period_s", 2.0, 2.1),
        ("rapidity_spent", 5e-6, 7e-6),
    ] {
        let value = object[key].as_f64().expect(key);
        assert!(low < value && value < high, "{key}: {value}");
    }
    // The peak is where the full thrust meets the fullest tanks: at the end of the ramp.
    assert_eq!(object["spans"][0]["peak_at_s"], 60);
    let force = object["spans"][0]["peak_n"].as_f64().expect("a force");
    assert!((force - 0.980_665 * 110.0).abs() < 1e-6, "{force}");
    assert_eq!(object["ramps"][0]["state"], "kept");
    for table in ["nodes", "spans", "engines", "ramps", "broken"] {
        let (status, stdout, _) = loads(LINE, &["--as", "csv", "--table", table]);
        assert!(status == 0 && stdout.starts_with("at_s,"), "{table}: {stdout}");
    }
}

#[test]
fn text_carries_the_caution() {
    let (status, stdout, stderr) = loads(LINE, &[]);
    assert_eq!((status, stderr.as_str()), (0, ""));
    assert!(told(&stdout, "caution:").contains("do not replace review by qualified structural"));
}

#[test]
fn what_breaks_ends_with_one_and_says_what_would_mend_it() {
    for (from, to, rule, sentence) in [
        (
            "strength = \"1 kN\"",
            "strength = \"0.2 kN\"",
            "broken: strength",
            "tug to pod carries 107.873 N of 100 N in phase 1, from 55.621 s, most at 1 min; \
             remedy: a strength of 215.747 N",
        ),
        (
            "rating = \"1 g0\"",
            "rating = \"0.05 g0\"",
            "broken: rating",
            "pod feels 0.980665 m/s^2 of 0.490333 m/s^2 in phase 1, from 30 s, most at 1 min; \
             remedy: hold no more than 0.0499999 g0 at the reference, or build the node for \
             0.100001 g0",
        ),
        (
            "node = \"tug\"\nexhaust",
            "node = \"pod\"\nexhaust",
            "broken: slack",
            "tug to pod is slack: it would be pushed with 990.472 N in phase 1, from 0 s, most at \
             1 min; remedy: move thrust to `tug` or fore of it, or file the span as a boom",
        ),
        (
            "propellant = \"400 kg\"",
            "propellant = \"50 kg\"",
            "broken: propellant",
            "engine at tug runs dry: 50 kg aboard of",
        ),
    ] {
        assert!(LINE.contains(from));
        let (status, stdout, stderr) = loads(&LINE.replace(from, to), &[]);
        assert_eq!((status, stderr.as_str()), (1, ""), "{to}");
        let found = told(&stdout, rule);
        assert!(found.contains(sentence), "{to}: {found}");
        let (status, object) = json(&LINE.replace(from, to));
        assert_eq!(status, 1);
        assert_eq!(object["broken"][0]["rule"], rule.trim_start_matches("broken: "));
        assert!(!object["broken"][0]["remedy"].as_str().expect("a remedy").is_empty());
    }
}

#[test]
fn what_is_offered_is_accepted() {
    for (from, to, mended) in [
        ("strength = \"1 kN\"", "strength = \"0.2 kN\"", "strength = \"215.747 N\""),
        ("rating = \"1 g0\"", "rating = \"0.05 g0\"", "rating = \"0.100001 g0\""),
    ] {
        assert_eq!(loads(&LINE.replace(from, to), &[]).0, 1);
        let (status, stdout, _) = loads(&LINE.replace(from, mended), &[]);
        assert_eq!(status, 0, "{mended}: {stdout}");
    }
    // What an engine is said to need is enough, its own weight included.
    let short = LINE.replace("\"400 kg\"", "\"50 kg\"");
    let (_, object) = json(&short);
    let remedy = object["broken"][0]["remedy"].as_str().expect("a remedy");
    let (needed, _) = remedy.split_once(" aboard").expect("an amount");
    assert_eq!(loads(&LINE.replace("400 kg", needed), &[]).0, 0, "{needed}");
}

#[test]
fn a_tether_goes_slack_inside_a_ramp_that_turns_the_thrust() {
    let text = LINE.replace(
        "ramp = [\"0.1 g0\", \"0 g0\"]\nfor = \"1 min\"",
        "ramp = [\"0.1 g0\", \"-0.1 g0\"]\nfor = \"2 min\"",
    );
    let (status, object) = json(&text);
    assert_eq!(status, 1);
    let broken = &object["broken"][0];
    assert_eq!((broken["rule"].as_str(), broken["phase"].as_i64()), (Some("slack"), Some(3)));
    assert_eq!(broken["from_s"].as_f64(), Some(60.0 + 3600.0 + 60.0));
    assert_eq!(broken["at_s"].as_f64(), Some(60.0 + 3600.0 + 120.0));
    let remedy = broken["remedy"].as_str().expect("a remedy");
    assert!(remedy.starts_with("keep the thrust towards the fore end"), "{remedy}");
}

#[test]
fn a_short_ramp_is_a_warning() {
    let text = LINE.replace("for = \"1 min\"", "for = \"1 s\"");
    let (status, stdout, _) = loads(&text, &[]);
    assert_eq!(status, 0);
    let found = told(&stdout, "warning: ramp");
    assert!(found.contains("the thrust changes within 1 s, the line swings in 2.0"), "{found}");
    assert!(found.contains("`pod` is left ringing by up to"), "{found}");
}

#[test]
fn an_absurd_mass_ratio_is_told_in_plain_words() {
    let text = LINE.replace("for = \"1 h\"", "for = \"90 a\"");
    let (status, stdout, _) = loads(&text, &["--at", "90 a"]);
    assert_eq!(status, 1);
    assert!(stdout.contains("exceeds the largest double"), "{stdout}");
    let found = told(&stdout, "The plan asks for a mass ratio of 10^4");
    assert!(found.contains("more than there is matter to burn"), "{found}");
    let (_, object) = json(&text);
    let log10 = object["log10_mass_ratio_of_plan"].as_f64().expect("a logarithm");
    assert!((4e4..5e4).contains(&log10), "{log10}");
    assert_eq!(object["broken"][0]["rule"], "propellant");
}

#[test]
fn a_line_that_is_crushed_or_beyond_the_horizon_is_refused() {
    let soft = LINE
        .replace("kind = \"tether\"", "kind = \"boom\"")
        .replace("\"1 MN\"", "\"20 N\"")
        .replace("node = \"tug\"\nexhaust", "node = \"pod\"\nexhaust");
    let (status, stdout, stderr) = loads(&soft, &[]);
    assert_eq!((status, stdout.as_str()), (2, ""));
    assert!(stderr.contains("would be pushed shorter than nothing"), "{stderr}");
    assert!(stderr.contains("remedy: a larger axial stiffness"), "{stderr}");
    let far = LINE.replace("\"-1 km\"", "\"-10 ly\"");
    let (status, stdout, stderr) = loads(&far, &[]);
    assert_eq!((status, stdout.as_str()), (2, ""));
    assert!(stderr.contains("horizon"), "{stderr}");
}

#[test]
fn towers_and_shafts_stand() {
    for (file, word) in [("layouts/tower.toml", "buckling"), ("layouts/shaft.toml", "below 1e-19")]
    {
        let (status, stdout, stderr) = seen(&clockspar(&["loads", file]));
        assert_eq!((status, stderr.as_str()), (0, ""), "{file}");
        assert!(told(&stdout, "caution").contains(word), "{file}: {stdout}");
        for command in ["rates", "offsets", "check"] {
            let (status, stdout, _) = seen(&clockspar(&[command, file]));
            assert_eq!(status, 0, "{command} {file}: {stdout}");
        }
        let (_, stdout, _) = seen(&clockspar(&["offsets", file, "--as", "json"]));
        let object: Value = serde_json::from_str(&stdout).expect("one object");
        assert!(object["rapidity"].is_null());
        assert!(object["stretch"].as_array().expect("a table").len() > 5);
    }
    // The shaft hangs: taut throughout, and longer than the drum says.
    let (_, stdout, _) = seen(&clockspar(&["loads", "layouts/shaft.toml", "--as", "json"]));
    let object: Value = serde_json::from_str(&stdout).expect("one object");
    for span in object["spans"].as_array().expect("a table") {
        assert!(span["force_aft_n"].as_f64() > Some(0.0), "{span}");
        assert!(span["stretch_m"].as_f64() > Some(0.0), "{span}");
        assert!(span["peak_at_s"].is_null(), "{span}");
    }
}

#[test]
fn a_gradient_that_bends_too_much_is_warned_of_where_results_are_shown() {
    let text = "name = \"mast\"\n[[node]]\nname = \"foot\"\n[[node]]\nname = \"top\"\n\
                position = \"12 km\"\n[standing]\ngravity = \"9.8 m/s^2\"\ngradient = \"3e-6 /s^2\"\n";
    for command in ["rates", "offsets", "loads"] {
        let (status, stdout, _) = seen(&with_input(&[command, "-"], text));
        assert_eq!(status, 0);
        let found = told(&stdout, "warning: gravity is taken to change evenly");
        assert!(found.contains("4.4e-18 at `top`"), "{command}: {found}");
    }
}

#[test]
fn a_line_that_runs_dry_says_up_to_when_its_forces_count() {
    let text = LINE.replace("\"400 kg\"", "\"50 kg\"");
    for command in ["loads", "check"] {
        let (status, stdout, _) = seen(&with_input(&[command, "-"], &text));
        assert_eq!(status, 1, "{command}");
        let found = told(&stdout, "Peaks of forces, strength and slack are those up to the moment");
        assert!(found.contains("the first engine runs dry"), "{command}: {found}");
        let (_, stdout, _) = seen(&with_input(&[command, "-"], LINE));
        assert!(!stdout.contains("runs dry:"), "{command}");
    }
}

#[test]
fn stretch_says_that_heat_is_in_it() {
    let (_, stdout, _) = seen(&clockspar(&["loads", "layouts/braking-run.toml"]));
    let said = "The stretch of a span is that of force and temperature together.";
    assert!(told(&stdout, "The stretch of a span").contains(said), "{stdout}");
    assert!(!seen(&with_input(&["loads", "-"], LINE)).1.contains(said));
}
