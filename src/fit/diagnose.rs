//! What a fit cannot say, and the measurement that would.

use super::solve::{Fitted, Question};

/// Unknowns that the data leave to the priors.
#[derive(Debug, Clone, PartialEq)]
pub struct Doubt {
    /// Their names, those that weigh most first.
    pub names: Vec<String>,
    /// The standard deviation of their combination after the fit, in units of the priors' (1: nothing was learned).
    pub left: f64,
    /// The measurement that would tell them apart.
    pub remedy: String,
}

/// Combinations of which the data leave more than two fifths of what the priors leave open. With J the slopes in units of the priors'
/// standard deviations, an eigenvalue l of J^T J leaves 1/sqrt(1 + l) of the prior along its eigenvector.
#[must_use]
pub fn doubts(question: &Question, fitted: &Fitted) -> Vec<Doubt> {
    const LEFT: f64 = 0.4;
    let eigen = fitted.information.clone().symmetric_eigen();
    let mut all: Vec<Doubt> = Vec::new();
    for (value, vector) in eigen.eigenvalues.iter().zip(eigen.eigenvectors.column_iter()) {
        let left = 1.0 / (1.0 + value.max(0.0)).sqrt();
        if left < LEFT {
            continue;
        }
        let mut parts: Vec<(f64, &str)> = vector
            .iter()
            .zip(&question.unknowns)
            .map(|(part, unknown)| (part.abs(), unknown.name.as_str()))
            .filter(|(part, _)| *part > 0.25)
            .collect();
        parts.sort_by(|a, b| b.0.total_cmp(&a.0));
        let names: Vec<String> = parts.iter().map(|(_, name)| (*name).to_string()).collect();
        let remedy = remedy(&names);
        all.push(Doubt { names, left, remedy });
    }
    all.sort_by(|a, b| b.left.total_cmp(&a.left));
    all
}

/// What to measure. A direct look at one of the unknowns frees the others.
fn remedy(names: &[String]) -> String {
    let has = |word: &str| names.iter().any(|n| n.rsplit('.').next() == Some(word));
    let mut all = Vec::new();
    if has("zero") || has("tilt") {
        all.push(
            "read the tilt's scale where the pump's reflection returns on itself, and give it as stage.zero",
        );
    }
    if has("cross_tilt") {
        all.push("set the cross tilt to zero by the back-reflection");
    }
    if has("wavelength") {
        all.push("measure the pump's wavelength with a spectrometer");
    }
    if has("distance") {
        all.push("measure the distance, or the same rings on a screen at a second distance");
    }
    if has("temperature") {
        all.push("read the crystal's temperature, or measure at two temperatures");
    }
    if has("x") || has("y") {
        all.push("mark where the undeviated pump hits the screen");
    }
    if has("phi") {
        all.push(
            "nothing in the rings depends on phi in a uniaxial crystal: ask for the maker's certificate",
        );
    }
    if has("roll") {
        all.push("measure ring centres or crossings of both polarizations, since centred rings look the same at any roll");
    }
    if all.is_empty() {
        all.push("measure at more tilts, further apart");
    }
    all.join("; or ")
}
