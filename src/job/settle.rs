//! Cuts that were given as a target, and azimuths that were left open.

use super::document::JobError;
use super::setup::{Needs, Setup, SetupError};
use crate::frame::{Orientation, Reversal};
use crate::matching::{ConesError, Design, Emission, Find, Interaction, best_phi, design};
use crate::material::Optic;
use crate::optics::Crystal;

/// Solves a cut that was given as a target, and chooses phi where it was left open.
pub(super) fn settle_cut(setup: &mut Setup, index: usize, needs: Needs) -> Result<(), SetupError> {
    let given = setup.cut[index];
    if !needs.cut {
        return Ok(());
    }
    let Some(target) = given.target else {
        if !given.theta {
            return Err(JobError(format!(
                "no cut: pass --theta (and --phi), or let it be solved with --cut, for example --cut {}; \
                 `twincone cut` answers which one to order",
                if setup.interaction == Interaction::One { "half-angle=3deg" } else { "crossing=3deg" }
            ))
            .into());
        }
        let biaxial = setup.crystals[index].material.file.optic == Optic::Biaxial;
        if biaxial && !given.phi {
            let id = &setup.crystals[index].material.id;
            return Err(JobError(format!(
                "no phi: {id} is biaxial, so its cut needs both angles; pass --phi, for example --phi 0deg for the XZ plane"
            ))
            .into());
        }
        choose_phi(setup, index);
        return Ok(());
    };
    if setup.pump.is_none() {
        return Err(JobError("a cut given as a target needs a pump wavelength: pass --pump".into()).into());
    }
    let question = Design {
        crystal: setup.crystals[index].clone(),
        photons: setup.photons(),
        fixed_signal: setup.signals.fixed(),
        interaction: setup.interaction,
        target,
        find: Find::Theta,
        phi_given: given.phi,
    };
    let found = design(&question).map_err(|e| match e {
        ConesError::Material(e) => SetupError::Material(e),
        ConesError::Description(text) => JobError(text).into(),
    })?;
    let best = found.into_iter().max_by(|a, b| a.d_eff.unwrap_or(0.0).total_cmp(&b.d_eff.unwrap_or(0.0)));
    let Some(best) = best else {
        return Err(SetupError::NoCut(format!(
            "no cut of {} gives that in {}; `twincone cut` with the same options says how far off it is",
            setup.crystals[index].material.id, setup.interaction
        )));
    };
    setup.crystals[index].cut = best.crystal.cut;
    Ok(())
}

/// Gives a uniaxial crystal whose phi was left open the phi of largest |d_eff|; its geometry does not depend on it.
pub(super) fn choose_phi(setup: &mut Setup, index: usize) {
    let given = setup.cut[index];
    let crystal = &setup.crystals[index];
    let (Some(_), false, Some(tensor)) = (setup.pump, given.phi, crystal.material.tensor.clone()) else {
        return;
    };
    if crystal.material.file.optic != Optic::Uniaxial {
        return;
    }
    let upright =
        Crystal { orientation: Orientation::default(), reversal: Reversal::None, ..crystal.clone() };
    let Ok(emission) = Emission::of(&upright, setup.photons()) else { return };
    let Some(roles) = emission.wanted(&upright, setup.interaction).ok().and_then(|r| r.first().copied())
    else {
        return;
    };
    if let Some(phi) = best_phi(&emission, roles, &tensor) {
        setup.crystals[index].cut.phi = phi;
    }
}
