//! Loads of every shipped layout, read from its file.

use std::fs;
use std::path::Path;

use clockspar::layout::{self, Course};
use clockspar::model::array_time::ArrayTime;
use clockspar::model::loads::{Gravity, Loads, Structure};

#[test]
fn every_shipped_layout_has_loads() {
    let folder = Path::new(env!("CARGO_MANIFEST_DIR")).join("layouts");
    let mut seen = 0;
    for entry in fs::read_dir(&folder).expect("the layouts") {
        let path = entry.expect("an entry").path();
        if path.extension().is_none_or(|ending| ending != "toml") {
            continue;
        }
        let text = fs::read_to_string(&path).expect("a layout");
        let files =
            |name: &str| fs::read_to_string(folder.join(name)).map_err(|error| error.to_string());
        let name = path.file_name().and_then(|name| name.to_str()).expect("a name");
        let layout = layout::read(name, &text, &files).expect("a checked layout");
        let structure = Structure::from_layout(&layout);
        let loads = match &layout.course {
            Course::Thrust(plan) => Loads::under_thrust(structure, plan),
            Course::Standing(standing) => Loads::standing(
                structure,
                Gravity {
                    gravity_m_s2: standing.gravity_m_s2,
                    gradient_per_s2: standing.gradient_per_s2,
                },
            ),
        };
        let loads = loads.unwrap_or_else(|fault| panic!("{name}: {fault}"));
        assert!(loads.series_error() < 1e-15, "{name}: {:e}", loads.series_error());
        let state = loads.state(ArrayTime::from_seconds(100));
        for row in 0..layout.nodes.len() {
            let moved = (loads.position_m(&state, row) - loads.unloaded_position_m(row)).to_f64();
            let size = layout.nodes[row].position_m.abs();
            assert!(moved.abs() <= 0.05 * size, "{name}, row {row}: moved by {moved} m");
            assert!(loads.felt_acceleration_peak(row).is_some(), "{name}, row {row}");
        }
        for span in &layout.spans {
            let peaks = loads.force_peaks(span.fore).expect("a plan");
            assert!(peaks.smallest.value <= peaks.largest.value);
            assert_eq!(loads.strength(span.fore).is_some(), span.strength_n.is_some());
        }
        if let Some(period) = loads.lowest_period() {
            for ringing in loads.ringing(&period) {
                assert!(ringing.share > 0.0 && ringing.share <= 1.0, "{name}: {ringing:?}");
            }
        }
        seen += 1;
    }
    assert!(seen > 3);
}
