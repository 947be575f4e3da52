//! Layouts that read: the examples, the order of rows, series, units and dates.

use clockspar::layout::{self, Layout};

fn no_files(name: &str) -> Result<String, String> {
    Err(format!("{name} is not here"))
}

fn read(text: &str) -> Layout {
    layout::read("test.toml", text, &no_files).unwrap_or_else(|faults| panic!("{faults}"))
}

#[test]
fn the_examples_read() {
    for (name, nodes) in [
        ("towed-array", 12),
        ("gauge-boom", 7),
        ("near-horizon", 8),
        ("braking-run", 6),
        ("thousand-heads", 1000),
    ] {
        let path = format!("layouts/{name}.toml");
        let layout = read(&std::fs::read_to_string(path).expect("an example"));
        assert_eq!(layout.nodes.len(), nodes, "{name}");
    }
}
