//! The library called directly: where the cones of a crossed-cone crystal cross, against its temperature, as a table.
//!
//! `cargo run --release --example crossing_vs_temperature`

use std::error::Error;
use std::sync::Arc;

use twincone::matching::{Interaction, Want, cones};
use twincone::material::Catalogue;
use twincone::optics::Crystal;
use twincone::quantity::{Temperature, Wavelength};

fn main() -> Result<(), Box<dyn Error>> {
    let bbo = Arc::new(Catalogue::default().get("bbo")?);
    let pump = Wavelength::from_nm(405.0);
    let mut crystal = Crystal::new(bbo, Some("tamosauskas-2018"))?.with_cut(42.35, 0.0);
    println!("temperature_degc,crossing_deg,intersection_angle_deg,status");
    for step in 0..=10 {
        let celsius = 10.0 * f64::from(step);
        crystal.temperature = Temperature::celsius(celsius);
        let one = std::slice::from_ref(&crystal);
        let found = cones(one, pump, &[pump.doubled()], Interaction::Two, Want::Crossings)?;
        for row in &found.crossings {
            // rings that miss each other are an answer too: a row without angles
            match &row.crossing {
                Some(meet) => {
                    let (polar, angle) = (meet.direction.polar_deg(), meet.angle.to_degrees());
                    println!("{celsius},{polar:.4},{angle:.2},{}", row.status);
                }
                None => println!("{celsius},,,{}", row.status),
            }
        }
    }
    Ok(())
}
