//! What can be said of a question without computing.

use super::measured::Seen;
use super::solve::{FitError, Question};

/// Too few numbers, impossible uncertainties, places where no light can go.
pub(super) fn check(question: &Question) -> Result<(), FitError> {
    let numbers: usize = question.data.iter().map(|m| m.seen.count()).sum();
    let unknowns = question.unknowns.len();
    if unknowns == 0 {
        return Err(FitError("nothing is free: pass --free, for example --free theta,zero".into()));
    }
    if numbers < unknowns {
        let names: Vec<&str> = question.unknowns.iter().map(|u| u.name.as_str()).collect();
        return Err(FitError(format!(
            "{numbers} measured number{} for {unknowns} unknowns ({}): measure more rings, at three or more tilts, or free fewer",
            if numbers == 1 { "" } else { "s" },
            names.join(", ")
        )));
    }
    // nobody reads a screen to a nanometre
    if let Some(m) = question.data.iter().find(|m| m.sigma.is_some_and(|sigma| sigma < 1e-6)) {
        return Err(FitError(format!(
            "line {}: an uncertainty below 1e-6 mm or deg; look at the unit of sigma",
            m.line
        )));
    }
    let distance = question.setup.screen.mm();
    let far = 60f64.to_radians().tan() * distance;
    for m in &question.data {
        let beyond = |what: &str, value: f64| {
            FitError(format!(
                "line {}: {what} {value} mm on a screen at {distance} mm lies more than 60 deg off the pump; look at the unit \
                 and at --distance",
                m.line
            ))
        };
        match m.seen {
            Seen::Ring { centre, radius } => {
                if let Some(c) = centre.filter(|c| c.norm() > far) {
                    return Err(beyond("a centre", c.norm()));
                }
                if let Some(r) = radius.filter(|r| *r > far) {
                    return Err(beyond("a radius of", r));
                }
            }
            Seen::Edge(p) | Seen::Crossing(p) if p.norm() > far => return Err(beyond("a point", p.norm())),
            Seen::Cone { axis, half_angle } => {
                let wide = axis.map_or(0.0, |a| a.norm()).max(half_angle.unwrap_or(0.0));
                if wide > 60.0 {
                    return Err(FitError(format!(
                        "line {}: {wide} deg is more than 60 deg off the pump",
                        m.line
                    )));
                }
            }
            _ => {}
        }
    }
    Ok(())
}
