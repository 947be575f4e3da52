//! The keys of every table of a layout.

/// A table of a layout: how its header is written, and the keys it knows.
#[derive(Debug)]
pub(crate) struct Kind {
    /// The header, e.g. `[[node]]`.
    pub(crate) title: &'static str,
    /// The key under which it stands, e.g. `node`.
    pub(crate) key: &'static str,
    /// The keys inside.
    pub(crate) keys: &'static [&'static str],
}

pub(crate) const TOP: Kind = Kind {
    title: "a layout",
    key: "",
    keys: &[
        "name",
        "revision",
        "reference",
        "epoch",
        "positions",
        "design_acceleration",
        "node",
        "series",
        "survey",
        "span",
        "engine",
        "phase",
        "acceleration",
        "standing",
        "clock",
        "link",
        "station",
        "limit",
        "note",
    ],
};

pub(crate) const NODE: Kind = Kind {
    title: "[[node]]",
    key: "node",
    keys: &[
        "name",
        "position",
        "u_position",
        "dof_position",
        "shape_position",
        "mass",
        "clock",
        "rating",
        "bias",
        "u_bias",
        "dof_bias",
        "shape_bias",
        "reading_at_start",
    ],
};

pub(crate) const SERIES: Kind = Kind {
    title: "[[series]]",
    key: "series",
    keys: &[
        "prefix",
        "count",
        "from",
        "to",
        "spacing",
        "u_position",
        "dof_position",
        "shape_position",
        "mass",
        "clock",
        "rating",
        "bias",
        "u_bias",
        "dof_bias",
        "shape_bias",
        "reading_at_start",
    ],
};

pub(crate) const SURVEY: Kind = Kind { title: "[survey]", key: "survey", keys: &["file"] };

pub(crate) const SPAN: Kind = Kind {
    title: "[[span]]",
    key: "span",
    keys: &[
        "along",
        "kind",
        "linear_density",
        "axial_stiffness",
        "u_axial_stiffness",
        "dof_axial_stiffness",
        "shape_axial_stiffness",
        "strength",
        "safety_factor",
        "thermal_expansion",
        "u_thermal_expansion",
        "dof_thermal_expansion",
        "shape_thermal_expansion",
        "temperature_change",
        "u_temperature_change",
        "dof_temperature_change",
        "shape_temperature_change",
    ],
};

pub(crate) const ENGINE: Kind = Kind {
    title: "[[engine]]",
    key: "engine",
    keys: &["node", "share", "exhaust_speed", "propellant"],
};

pub(crate) const PHASE: Kind =
    Kind { title: "[[phase]]", key: "phase", keys: &["hold", "ramp", "for"] };

pub(crate) const ACCELERATION: Kind = Kind {
    title: "[acceleration]",
    key: "acceleration",
    keys: &["history", "u_scale", "dof_scale", "shape_scale", "u_zero", "dof_zero", "shape_zero"],
};

pub(crate) const STANDING: Kind = Kind {
    title: "[standing]",
    key: "standing",
    keys: &[
        "gravity",
        "u_gravity",
        "dof_gravity",
        "shape_gravity",
        "gradient",
        "u_gradient",
        "dof_gradient",
        "shape_gradient",
    ],
};

pub(crate) const CLOCK: Kind = Kind {
    title: "[clock.NAME]",
    key: "clock",
    keys: &[
        "frequency",
        "white_pm",
        "flicker_pm",
        "white_fm",
        "flicker_fm",
        "random_walk_fm",
        "bandwidth",
        "acceleration_sensitivity",
        "drift",
        "u_bias",
        "dof_bias",
        "shape_bias",
        "steer_step",
    ],
};

pub(crate) const LINK: Kind = Kind {
    title: "[[link]]",
    key: "link",
    keys: &["between", "carrier", "delay_out", "delay_back", "instability"],
};

pub(crate) const STATION: Kind =
    Kind { title: "[[station]]", key: "station", keys: &["name", "position"] };

pub(crate) const LIMIT: Kind = Kind {
    title: "[[limit]]",
    key: "limit",
    keys: &["node", "pair", "clock_offset", "resolve_within"],
};

pub(crate) const NOTE: Kind = Kind { title: "[[note]]", key: "note", keys: &["at", "text"] };

// An uncertainty, its degrees of freedom and its shape.
pub(crate) const U_POSITION: [&str; 3] = ["u_position", "dof_position", "shape_position"];
pub(crate) const U_BIAS: [&str; 3] = ["u_bias", "dof_bias", "shape_bias"];
pub(crate) const U_AXIAL_STIFFNESS: [&str; 3] =
    ["u_axial_stiffness", "dof_axial_stiffness", "shape_axial_stiffness"];
pub(crate) const U_THERMAL_EXPANSION: [&str; 3] =
    ["u_thermal_expansion", "dof_thermal_expansion", "shape_thermal_expansion"];
pub(crate) const U_TEMPERATURE_CHANGE: [&str; 3] =
    ["u_temperature_change", "dof_temperature_change", "shape_temperature_change"];
pub(crate) const U_SCALE: [&str; 3] = ["u_scale", "dof_scale", "shape_scale"];
pub(crate) const U_ZERO: [&str; 3] = ["u_zero", "dof_zero", "shape_zero"];
pub(crate) const U_GRAVITY: [&str; 3] = ["u_gravity", "dof_gravity", "shape_gravity"];
pub(crate) const U_GRADIENT: [&str; 3] = ["u_gradient", "dof_gradient", "shape_gradient"];

/// Every table below the top.
pub(crate) const TABLES: [&Kind; 13] = [
    &NODE,
    &SERIES,
    &SURVEY,
    &SPAN,
    &ENGINE,
    &PHASE,
    &ACCELERATION,
    &STANDING,
    &CLOCK,
    &LINK,
    &STATION,
    &LIMIT,
    &NOTE,
];

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn every_table_stands_at_the_top() {
        let tables = TABLES.iter().map(|kind| kind.key);
        let after_values = TOP.keys[6..].iter().copied();
        assert!(tables.eq(after_values));
    }
}
