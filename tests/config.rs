//! What a config promises: everything it states comes out as stated.

use limnograph::config::{Config, Quantity};

const BOX: &str = r#"
[series]
description = "Saltmarsh"

[units]
length = "Mpc/h"
mass = "1e10 Msun/h"
velocity = "km/s"
velocity_form = "peculiar/sqrt(a)"
star_formation_rate = "Msun/yr"

[cosmology]
hubble = 70
omega_matter = 0.3
omega_lambda = 0.7

[time]
coordinate = "a"

[volume]
box = 25.0
periodic = true

[gauges]
star_formation = true
black_holes = false
[gauges.wind_shells]
radii = [1, 2]
"#;

#[test]
fn a_usual_config_comes_out_as_stated() {
    let config = Config::parse(BOX, "limnograph.toml").unwrap();
    assert_eq!(config.units.factor(Quantity::Velocity, 0.25), 0.5e5);
    let names: Vec<&str> = config
        .gauges
        .iter()
        .map(|(name, _)| name.as_str())
        .collect();
    assert_eq!(names, ["star_formation", "wind_shells"]);
    let edge: f64 = 25.0 / 0.7;
    let volume = config.comoving_volume_mpc3().unwrap();
    assert!((volume / edge.powi(3) - 1.0).abs() < 1e-14);
}
