//! The tables of the gauge.

use crate::series::schema::{Column, Kind, ValueType};

/// One row for each station and shell.
pub(super) fn of_each_station() -> Vec<Column> {
    let float = |name: &str, unit: &str, kind, description: &str| {
        Column::new(
            "wind_shells",
            name,
            unit,
            kind,
            ValueType::Float,
            description,
        )
    };
    let rate = "solMass.yr**-1";
    vec![
        Column::new(
            "wind_shells",
            "step",
            "",
            Kind::Key,
            ValueType::Unsigned,
            "the host's step number",
        ),
        Column::new(
            "wind_shells",
            "station",
            "",
            Kind::Key,
            ValueType::Text,
            "name of the station",
        ),
        Column::new(
            "wind_shells",
            "shell",
            "",
            Kind::Key,
            ValueType::Unsigned,
            "number of the shell, from the inside",
        ),
        float(
            "radius_inner",
            "kpc",
            Kind::Instant,
            "physical radius of the shell's inner edge",
        ),
        float(
            "radius_outer",
            "kpc",
            Kind::Instant,
            "physical radius of the shell's outer edge",
        ),
        float(
            "mass_outflow_rate",
            rate,
            Kind::Instant,
            "mass of gas that moves outward through the shell per time",
        ),
        float(
            "mass_inflow_rate",
            rate,
            Kind::Instant,
            "mass of gas that moves inward through the shell per time, as a positive number",
        ),
        float(
            "gas_mass",
            "solMass",
            Kind::Instant,
            "mass of gas in the shell",
        ),
        Column::new(
            "wind_shells",
            "elements",
            "",
            Kind::Instant,
            ValueType::Unsigned,
            "gas elements in the shell",
        ),
    ]
}

/// One row for each shell, over all stations.
pub(super) fn of_all_stations() -> Vec<Column> {
    let column = |name: &str, unit: &str, kind, value, description: &str| {
        Column::new("wind_shells", name, unit, kind, value, description)
    };
    let mut columns: Vec<Column> = of_each_station()
        .into_iter()
        .filter(|column| {
            ["step", "shell", "radius_inner", "radius_outer"].contains(&column.name.as_str())
        })
        .collect();
    for (name, description) in [
        ("stations", "stations that the row tells of"),
        (
            "elements",
            "gas elements in the shell, of all stations together",
        ),
    ] {
        let unsigned = ValueType::Unsigned;
        columns.push(column(name, "", Kind::Instant, unsigned, description));
    }
    for (name, unit, what) in [
        (
            "mass_outflow_rate",
            "solMass.yr**-1",
            "mass of gas that moves outward through the shell per time",
        ),
        (
            "mass_inflow_rate",
            "solMass.yr**-1",
            "mass of gas that moves inward through the shell per time, as a positive number",
        ),
        ("gas_mass", "solMass", "mass of gas in the shell"),
    ] {
        for percentile in super::summary::PERCENTILES {
            columns.push(column(
                &format!("{name}_p{percentile}"),
                unit,
                Kind::Instant,
                ValueType::Float,
                &format!("{what}: {percentile} percent of the stations have at most this"),
            ));
        }
        columns.push(column(
            &format!("{name}_total"),
            unit,
            Kind::Instant,
            ValueType::Float,
            &format!("{what}: the sum over all stations"),
        ));
    }
    columns
}
