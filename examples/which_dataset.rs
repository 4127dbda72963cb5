//! The library called directly: how far to turn a crystal so that its cones cross 3 deg from the pump, if this or that
//! published data set of refractive indices is right.
//!
//! `cargo run --release --example which_dataset`

use std::error::Error;
use std::sync::Arc;

use twincone::matching::{Actuator, Interaction, Photons, Target, Tuning, tune};
use twincone::material::Catalogue;
use twincone::optics::Crystal;
use twincone::quantity::Wavelength;

fn main() -> Result<(), Box<dyn Error>> {
    let bbo = Arc::new(Catalogue::default().get("bbo")?);
    let pump = Wavelength::from_nm(405.0);
    let photons = Photons::new(pump, pump.doubled()).ok_or("the signal is shorter than the pump")?;
    println!("dataset,crossing_untilted_deg,tilt_for_3_deg");
    for set in bbo.sets() {
        // a set that ends short of the pump has no say
        if ![photons.pump, photons.signal, photons.idler].iter().all(|w| set.covers(*w)) {
            eprintln!("{}: does not cover {pump} to {}", set.id, photons.signal);
            continue;
        }
        let tuned = tune(&Tuning {
            crystal: Crystal::new(Arc::clone(&bbo), Some(&set.id))?.with_cut(42.35, 0.0),
            photons,
            fixed_signal: None,
            interaction: Interaction::Two,
            target: Target::Crossing(3f64.to_radians()),
            actuator: Some(Actuator::Tilt),
        })?;
        let degrees =
            |radians: Option<f64>| radians.map_or(String::new(), |a| format!("{:.3}", a.to_degrees()));
        // of several turns the first is the nearest to where the mount stands
        let turn = tuned.turns.first().map(|turn| turn.setting);
        println!("{},{},{}", set.id, degrees(tuned.now.crossing), degrees(turn));
    }
    Ok(())
}
