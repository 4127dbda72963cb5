//! Report `state`: density matrices, what they are worth, and what spoils them.

use nalgebra::Matrix4;

use super::angles::{fixed, grid, prose, rounded, signed};
use super::table::{Cell, Column, Rows, Table, column};
use crate::job::Setup;
use crate::matching::Status;
use crate::pairs::{Amplitude, Basis, DensityMatrix, Loss, Opening, State};

/// Columns, without the two that end every table.
pub const COLUMNS: [Column; 16] = [
    column("pair", "", "number of the pair of crossings; empty where the directions are fixed"),
    column("a_wavelength_nm", "nm", "nominal, of photon a"),
    column("b_wavelength_nm", "nm", "nominal, of photon b"),
    column("a_h_deg", "deg", "horizontal angle of arm a, outside"),
    column("a_v_deg", "deg", "vertical angle of arm a, outside"),
    column("b_h_deg", "deg", "horizontal angle of arm b, outside"),
    column("b_v_deg", "deg", "vertical angle of arm b, outside"),
    column("basis", "", "oe: the polarizations of the two histories; lab: H and V of each arm"),
    column("visibility_hv", "", "contrast of coincidences between polarizers along the basis"),
    column("visibility_diagonal", "", "contrast between diagonal polarizers, the phase set for the best"),
    column("concurrence", "", "0 separable to 1 maximally entangled"),
    column("purity", "", "tr rho^2"),
    column("fidelity", "", "overlap with the nearest Bell state of that phase"),
    column("phase_deg", "deg", "of the second term of that Bell state"),
    column("chsh_max", "", "largest S of a CHSH test; above 2 no local model"),
    column("quadrature_error", "", "estimated error of a visibility"),
];

/// Elements of the density matrix; JSON alone holds them.
const ELEMENTS: [Column; 7] = [
    column("basis", "", "oe or lab"),
    column("row", "", "from 1"),
    column("column", "", "from 1"),
    column("row_state", "", "polarizations of a and b"),
    column("column_state", "", "polarizations of a and b"),
    column("re", "", "real part"),
    column("im", "", "imaginary part"),
];

const LOSSES: [Column; 2] = [
    column("cause", "", "what varies alone"),
    column("loss", "", "of the visibility between diagonal polarizers"),
];

/// A basis as a report names it and takes it.
trait InReport {
    fn of(self, state: &State) -> &DensityMatrix;
    fn kets(self, state: &State) -> [String; 4];
    fn diagonal(self, state: &State) -> f64;
}

impl InReport for Basis {
    fn of(self, state: &State) -> &DensityMatrix {
        match self {
            Self::Histories => &state.histories,
            Self::Lab => &state.lab,
        }
    }

    /// The four products, a first.
    fn kets(self, state: &State) -> [String; 4] {
        let [a, b] = match self {
            Self::Lab => [["H".to_string(), "V".to_string()], ["H".to_string(), "V".to_string()]],
            Self::Histories => state.pair.polarizations(),
        };
        let ket = |i: usize, j: usize| match a[i].len() + b[j].len() {
            2 => format!("{}{}", a[i], b[j]),
            _ => format!("{},{}", a[i], b[j]),
        };
        [ket(0, 0), ket(0, 1), ket(1, 0), ket(1, 1)]
    }

    /// Contrast between diagonal polarizers.
    fn diagonal(self, state: &State) -> f64 {
        match self {
            Self::Histories => state.histories.coherence(),
            Self::Lab => state.lab.visibility_diagonal(),
        }
    }
}

/// State, density matrices and budget.
#[must_use]
pub fn tables(state: &State, budget: &[Loss], bases: &[Basis]) -> Vec<Table> {
    let mut rows = Table::new("state", &COLUMNS);
    let mut elements = Table::new("density_matrix", &ELEMENTS);
    self::rows(state, bases, &mut rows);
    for basis in [Basis::Histories, Basis::Lab] {
        let kets = basis.kets(state);
        let rho: &Matrix4<Amplitude> = &basis.of(state).0;
        for (i, j) in (0..4).flat_map(|i| (0..4).map(move |j| (i, j))) {
            let cells: Vec<Cell> = vec![
                basis.name().into(),
                (i + 1).into(),
                (j + 1).into(),
                kets[i].clone().into(),
                kets[j].clone().into(),
                rho[(i, j)].re.into(),
                rho[(i, j)].im.into(),
            ];
            elements.push(&cells, state.extrapolated, state.status);
        }
    }
    let mut losses = Table::new("budget", &LOSSES);
    for Loss { cause, loss } in budget {
        losses.push(&[cause.to_string().into(), (*loss).into()], state.extrapolated, state.status);
    }
    vec![rows, elements, losses]
}

/// A row for each basis.
pub fn rows(state: &State, bases: &[Basis], out: &mut impl Rows) {
    for basis in bases {
        out.push(&cells(state, *basis), state.extrapolated, state.status);
    }
}

fn cells(state: &State, basis: Basis) -> Vec<Cell> {
    let rho = basis.of(state);
    let nearest = rho.nearest_bell();
    let [a, b] = [state.pair.a, state.pair.b];
    let mut cells = vec![
        state.number.map_or(Cell::Empty, Cell::from),
        state.pair.photons.signal.nm().into(),
        state.pair.photons.idler.nm().into(),
    ];
    cells.extend([a.h_deg(), a.v_deg(), b.h_deg(), b.v_deg()].map(Cell::degrees));
    cells.push(basis.name().into());
    let numbers = [
        rho.visibility_straight(),
        basis.diagonal(state),
        rho.concurrence(),
        rho.purity(),
        nearest.fidelity,
        nearest.phase.to_degrees(),
        rho.chsh_max(),
        state.error,
    ];
    cells.extend(numbers.map(Cell::from));
    cells
}

/// For people.
#[must_use]
pub fn text(setup: &Setup, state: &State, budget: &[Loss], bases: &[Basis]) -> String {
    let mut out = prose(&heading(state));
    out.push('\n');
    for basis in bases {
        out.push_str(&prose(&format!("{}: {}", basis.name(), nearest_words(state, *basis))));
    }
    out.push('\n');
    if state.status == Status::NotConverged {
        out.push_str(&prose(&format!(
            "Not converged: visibilities may be off by {:.0e}, far more than was asked for, so that these numbers say \
             little. The state turns too fast over the wavelengths or directions that are collected: take narrower \
             filters or irises, or a shorter crystal.",
            state.error
        )));
        out.push('\n');
    }
    let header =
        ["basis", "along", "diagonal", "concurrence", "purity", "fidelity", "phase deg", "CHSH S", "error"];
    let rows: Vec<Vec<String>> = bases.iter().map(|basis| row(state, *basis)).collect();
    out.push_str(&grid(&header, &rows));
    out.push_str(&prose(
        "along, diagonal: contrast of coincidences between polarizers along the basis and at 45 deg to it, the phase \
         set for the best.",
    ));
    out.push_str("\nWhat each cause alone takes from the diagonal contrast\n");
    let losses: Vec<Vec<String>> =
        budget.iter().map(|loss| vec![loss.cause.to_string(), fixed(loss.loss, 4)]).collect();
    out.push_str(&grid(&["cause", "loss"], &losses));
    out.push_str(&prose(&format!(
        "all together: {}; losses add up only where they are small.",
        fixed(1.0 - Basis::Histories.diagonal(state), 4)
    )));
    out.push('\n');
    out.push_str(&prose(&collection_words(setup, state)));
    out
}

fn heading(state: &State) -> String {
    let place = |d: crate::frame::Direction| {
        format!("h {} deg, v {} deg", signed(d.h_deg(), 3), signed(d.v_deg(), 3))
    };
    let which = state.number.map_or("Fixed directions".into(), |n| format!("Pair {n}"));
    let number = state.number.map_or(String::new(), |n| n.to_string());
    format!(
        "{which}: {number}a at {}, {} nm; {number}b at {}, {} nm",
        place(state.pair.a),
        rounded(state.pair.photons.signal.nm(), 3),
        place(state.pair.b),
        rounded(state.pair.photons.idler.nm(), 3)
    )
}

/// Which history makes all pairs, but for a thousandth that entangles nothing, if one does.
fn only_history(state: &State) -> Option<usize> {
    const REST: f64 = 1e-3;
    let [first, second] = [0, 3].map(|i| state.histories.0[(i, i)].re);
    if first.min(second) > REST * first.max(second) || state.histories.concurrence() > 0.01 {
        return None;
    }
    Some(usize::from(second > first))
}

fn nearest_words(state: &State, basis: Basis) -> String {
    if let Some(only) = only_history(state) {
        let which = ["first", "second"][only];
        let ket = match basis {
            Basis::Histories => format!(" |{}>", basis.kets(state)[3 * only]),
            Basis::Lab => String::new(),
        };
        return format!(
            "a product{ket}, not an entangled state: only the {which} of the two histories makes pairs, since the pump \
             drives it alone or the other is not phase-matched here"
        );
    }
    let nearest = basis.of(state).nearest_bell();
    let kets = basis.kets(state);
    let (i, j) = if nearest.alike { (0, 3) } else { (1, 2) };
    let explained = match basis {
        Basis::Lab => "H: lab x made perpendicular to the arm, V: arm x H",
        Basis::Histories if state.pair.first.crystal == state.pair.second.crystal => {
            "polarizations the crystal leaves, a first"
        }
        Basis::Histories => "polarizations the pairs of each crystal leave, a first",
    };
    format!(
        "near (|{}> + e^(i {} deg)|{}>)/sqrt 2 ({explained})",
        kets[i],
        rounded(nearest.phase.to_degrees(), 1),
        kets[j]
    )
}

fn row(state: &State, basis: Basis) -> Vec<String> {
    let rho = basis.of(state);
    let nearest = rho.nearest_bell();
    vec![
        basis.name().into(),
        fixed(rho.visibility_straight(), 4),
        fixed(basis.diagonal(state), 4),
        fixed(rho.concurrence(), 4),
        fixed(rho.purity(), 4),
        fixed(nearest.fidelity, 4),
        fixed(nearest.phase.to_degrees(), 2),
        fixed(rho.chsh_max(), 3),
        format!("{:.0e}", state.error),
    ]
}

/// What was integrated over.
fn collection_words(setup: &Setup, state: &State) -> String {
    let nm = state.band.map(|w| rounded(w * 1e9, 1));
    let band = format!("Photon a from {} to {} nm", nm[0], nm[1]);
    if state.points {
        let plates = if setup.bench.compensators.is_empty() {
            String::new()
        } else {
            "; plates in the arms are passed head-on".into()
        };
        return format!(
            "Points: a's direction stands, b goes wherever momentum sends it at each wavelength{plates}. {band}. Irises, \
             however small, are another thing: with both directions fixed only wavelengths near the nominal ones reach \
             both, so that they filter too (pass --iris)."
        );
    }
    let fibres = setup.bench.collection.iter().filter(|c| matches!(c.opening, Opening::Fibre(_))).count();
    match fibres {
        2 => format!(
            "Fibres: amplitudes add over directions in the two modes, which look at where the two histories come from on \
             average. {band}."
        ),
        1 if setup.bench.waist.is_some() => format!(
            "One fibre: amplitudes add over directions in its mode, which looks at where the two histories come from on \
             average; what that leaves adds as intensity over the directions of the other arm. {band}."
        ),
        1 => format!(
            "One fibre and a plane pump: directions add as intensities, weighed with the mode. {band}."
        ),
        _ => format!(
            "Irises: a pair counts when both photons pass. The two directions stand, so that irises filter wavelengths \
             too: tiny ones leave less than points do. {band}."
        ),
    }
}
