//! `links` and `reach` as scripts see them.

use std::process::Command;

fn clockspar(arguments: &[&str]) -> (i32, String, String) {
    let output = Command::new(env!("CARGO_BIN_EXE_clockspar"))
        .args(arguments)
        .current_dir(env!("CARGO_MANIFEST_DIR"))
        .env("LC_ALL", "C.UTF-8")
        .output()
        .expect("the program starts");
    let text = |bytes: Vec<u8>| String::from_utf8(bytes).expect("UTF-8");
    (output.status.code().unwrap_or(-1), text(output.stdout), text(output.stderr))
}

const TOWED: &str = "layouts/towed-array.toml";
const FAR: &str = "layouts/near-horizon.toml";

#[test]
fn links_have_their_columns() {
    let (status, csv, errors) = clockspar(&["links", TOWED, "--as", "csv", "--at", "20 min"]);
    assert_eq!((status, errors.as_str()), (0, ""));
    let mut lines = csv.lines();
    assert_eq!(
        lines.next(),
        Some(
            "at_s,from,to,separation_m,flight_array_s,flight_emitter_s,flight_receiver_s,\
             received_shift,shift_rate_per_s,carrier_hz,received_minus_carrier_hz,round_trip_s,\
             radar_distance_m,two_way_error_s"
        )
    );
    assert_eq!(lines.count(), 8, "four links, both ways");
    let (status, json, _) = clockspar(&["links", FAR, "--as", "json"]);
    assert_eq!(status, 0);
    assert!(json.starts_with("{\"schema\":\"clockspar.links/1\""), "{json}");
    assert!(json.contains("\"carrier_hz\":null,\"carrier_hz_why\":\"the layout states no carrier"));
    assert_eq!(json.matches("\"shift_low\":").count(), 14, "every neighbour pair, both ways");
}

#[test]
fn links_over_time_leave_the_summary_out_unless_it_is_named() {
    let over_time = ["links", TOWED, "--every", "10 h", "--as", "json"];
    let (status, json, _) = clockspar(&over_time);
    assert_eq!(status, 0);
    assert!(!json.contains("\"summary\""));
    let (status, csv, errors) = clockspar(&["links", TOWED, "--table", "summary", "--as", "csv"]);
    assert_eq!((status, errors.as_str()), (0, ""));
    assert!(csv.starts_with("at_s,from,to,shift_low,shift_low_at_s,shift_high,"), "{csv}");
    let (status, _, errors) = clockspar(&["links", TOWED, "--table", "links here"]);
    assert_eq!(status, 2);
    assert!(errors.contains("`links`, `summary`, `delays`"), "{errors}");
}

#[test]
fn reach_has_its_columns() {
    let (status, csv, errors) = clockspar(&["reach", FAR, "--as", "csv", "--at", "60 d"]);
    assert_eq!((status, errors.as_str()), (0, ""));
    assert!(csv.starts_with(
        "at_s,station,position_m,node,direction,last_call_s,sent_launch_s,sent_array_s,\
         arrives_array_s,arrives_launch_s,age_launch_s,received_shift,ln_ratio\n\
         5184000,home,0,lantern,to line,"
    ));
    assert_eq!(csv.lines().count(), 1 + 2 * 8 * 2);
}

#[test]
fn a_release_carries_its_caution() {
    let (status, text, errors) = clockspar(&["reach", TOWED, "--release", "pod1"]);
    assert_eq!((status, errors.as_str()), (0, ""));
    for wanted in ["caution: ", "recoil", "last tick", "\npasses\n", "\nheard\n", "drogue"] {
        assert!(text.contains(wanted), "{wanted} in {text}");
    }
    let arguments = ["reach", TOWED, "--release", "pod1", "--table", "passes", "--as", "json"];
    let (status, json, _) = clockspar(&arguments);
    assert_eq!(status, 0);
    assert!(json.contains("\"caution\":\"closing speeds are for planning"), "{json}");
    assert!(json.contains("\"last_tick_s\":"), "{json}");
    assert_eq!(json.matches("\"closing_speed_m_s\":").count(), 8, "pod2 to pod8 and the drogue");
    for (node, rule) in [("tug", "reference"), ("nobody", "no node")] {
        let (status, _, errors) = clockspar(&["reach", TOWED, "--release", node]);
        assert_eq!(status, 2, "{errors}");
        assert!(errors.contains(rule) && errors.contains("remedy: "), "{errors}");
    }
}

#[test]
fn silences_are_asked_for() {
    let arguments = ["reach", FAR, "--before", "end", "--table", "silences", "--as", "csv"];
    let (status, csv, errors) = clockspar(&arguments);
    assert_eq!((status, errors.as_str()), (0, ""));
    assert!(csv.starts_with("at_s,station,node,direction,clock,from_s,until_s\n"), "{csv}");
    let (status, _, errors) = clockspar(&["reach", FAR, "--before", "soon"]);
    assert_eq!(status, 2, "{errors}");
}

#[test]
fn a_standing_line_has_links_and_no_launch_frame() {
    let layout = "name = \"shaft\"\n[[node]]\nname = \"top\"\n[[node]]\nname = \"foot\"\n\
                  position = \"-450 m\"\n[standing]\ngravity = \"9.8012 m/s^2\"\n\
                  gradient = \"3.086e-6 /s^2\"\n[[station]]\nname = \"mast\"\nposition = \"0 m\"\n";
    let folder = tempfile::tempdir().expect("a folder");
    let path = folder.path().join("shaft.toml");
    std::fs::write(&path, layout).expect("a file");
    let path = path.to_str().expect("UTF-8");
    let (status, csv, _) = clockspar(&["links", path, "--as", "csv"]);
    assert_eq!(status, 0);
    let shift = |line: usize| -> f64 {
        let row = csv.lines().nth(line).expect("a row");
        row.split(',').nth(7).expect("a shift").parse().expect("a number")
    };
    // gL/c² with the gradient's share ΓL/(2g), up red and down blue.
    let c2 = 299_792_458.0 * 299_792_458.0;
    let wanted = (9.8012 * 450.0 + 0.5 * 3.086e-6 * 450.0 * 450.0) / c2;
    assert!((shift(1) / wanted - 1.0).abs() < 1e-12, "{csv}");
    assert!((shift(2) / -wanted - 1.0).abs() < 1e-12, "{csv}");
    let (status, json, _) = clockspar(&["reach", path, "--as", "json"]);
    assert_eq!(status, 0);
    assert!(json.contains("has no launch frame"), "{json}");
}
