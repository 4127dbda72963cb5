//! The library called directly: half angle of a cone against tilt, as a table.
//!
//! `cargo run --release --example ring_table`

use std::error::Error;
use std::sync::Arc;

use twincone::matching::{Interaction, Want, cones};
use twincone::material::Catalogue;
use twincone::optics::Crystal;
use twincone::quantity::{Angle, Wavelength};

fn main() -> Result<(), Box<dyn Error>> {
    let bbo = Arc::new(Catalogue::default().get("bbo")?);
    let pump = Wavelength::from_nm(405.0);
    println!("tilt_deg,half_angle_deg");
    for step in 0..=8 {
        let mut crystal = Crystal::new(Arc::clone(&bbo), Some("kato-1986"))?.with_cut(28.8, 90.0);
        crystal.orientation.tilt = Angle::from_degrees(0.25 * f64::from(step));
        let found = cones(&[crystal], pump, &[pump.doubled()], Interaction::One, Want::Both)?;
        let half_angle = found.rings[0].ring.as_ref().map(|ring| ring.half_angle.to_degrees());
        println!("{},{}", 0.25 * f64::from(step), half_angle.map_or(String::new(), |a| format!("{a:.4}")));
    }
    Ok(())
}
