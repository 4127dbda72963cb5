//! Report `materials`: the catalogue and the sources of its numbers.

use crate::matching::Status;
use crate::material::{Material, Optic};
use crate::quantity::Wavelength;

use super::angles::{grid, rounded};
use super::table::{Column, Rows, Table, column};

/// Columns, without the two that end every table.
pub const COLUMNS: [Column; 9] = [
    column("material", "", "crystal id"),
    column("formula", "", "chemical formula"),
    column("point_group", "", "symmetry of the crystal"),
    column(
        "optic_sign",
        "",
        "uniaxial or biaxial, positive or negative, at the middle of the default set's range",
    ),
    column("default_dataset", "", "data set used where none is named"),
    column("from_nm", "nm", "shortest wavelength that any set covers"),
    column("to_nm", "nm", "longest wavelength that any set covers"),
    column("datasets", "", "ids of all sets"),
    column("largest_d_pm_per_v", "pm/V", "largest element of the nonlinear tensor"),
];

/// One row per crystal.
#[must_use]
pub fn table(materials: &[Material]) -> Table {
    let mut table = Table::new("materials", &COLUMNS);
    for m in materials {
        let (from, to) = range(m);
        let sets: Vec<&str> = m.sets().iter().map(|s| s.id.as_str()).collect();
        let cells = vec![
            m.id.as_str().into(),
            m.file.formula.as_str().into(),
            m.file.point_group.get_ref().as_str().into(),
            m.optic_sign().into(),
            m.default_set().id.as_str().into(),
            from.into(),
            to.into(),
            sets.join(" ").into(),
            m.tensor.as_ref().map(|t| t.largest()).into(),
        ];
        table.push(&cells, false, Status::Ok);
    }
    table
}

fn range(m: &Material) -> (f64, f64) {
    let from = m.sets().iter().map(|s| s.from.nm()).fold(f64::INFINITY, f64::min);
    let to = m.sets().iter().map(|s| s.to.nm()).fold(0.0, f64::max);
    (from, to)
}

/// For people: the list.
#[must_use]
pub fn text(materials: &[Material]) -> String {
    let header =
        ["id", "formula", "group", "optic sign", "nm", "default set", "other sets", "largest d pm/V"];
    let rows: Vec<Vec<String>> = materials
        .iter()
        .map(|m| {
            let (from, to) = range(m);
            let others: Vec<&str> =
                m.sets().iter().map(|s| s.id.as_str()).filter(|id| *id != m.default_set().id).collect();
            vec![
                m.id.clone(),
                m.file.formula.clone(),
                m.file.point_group.get_ref().clone(),
                m.optic_sign(),
                format!("{} to {}", rounded(from, 0), rounded(to, 0)),
                m.default_set().id.clone(),
                if others.is_empty() { "-".into() } else { others.join(" ") },
                m.tensor.as_ref().map_or_else(|| "-".into(), |t| rounded(t.largest(), 2)),
            ]
        })
        .collect();
    grid(&header, &rows)
}

/// One row per data set, with sources.
#[must_use]
pub fn sets_table(m: &Material) -> Table {
    let columns = [
        column("dataset", "", "id"),
        column("citation", "", "publication"),
        column("known", "", "how its numbers are known"),
        column("seen_in", "", "where they were seen"),
        column("from_nm", "nm", "shortest wavelength"),
        column("to_nm", "nm", "longest wavelength"),
        column("temperature_degc", "degC", "where the indices hold; empty where the source does not say"),
        column("relative_to", "", "absolute, air, or not stated"),
        column("thermo_optic", "", "source of the thermo-optic terms; empty where there are none"),
        column("meets", "", "published numbers it meets that did not come from its coefficients"),
        column("warning", "", "what to know before using it"),
        column("remark", "", "what else is known"),
    ];
    let mut table = Table::new("sets", &columns);
    for set in m.sets() {
        let file = &set.file;
        let meets: Vec<String> =
            file.independent.iter().map(|i| format!("{} ({}; {})", i.what, i.known, i.source)).collect();
        let thermo = match &file.thermo {
            Some(t) => Some(format!("{} ({})", t.get_ref().source, t.get_ref().known)),
            None => set.has_thermo_optics().then(|| "part of the formula".into()),
        };
        let cells = vec![
            set.id.as_str().into(),
            file.citation.as_str().into(),
            file.known.to_string().into(),
            file.seen_in.as_deref().into(),
            set.from.nm().into(),
            set.to.nm().into(),
            file.temperature.as_ref().map(|_| set.temperature.degc()).into(),
            file.medium.to_string().into(),
            thermo.as_deref().into(),
            meets.join("; ").into(),
            file.warning.as_deref().into(),
            file.remark.as_deref().into(),
        ];
        table.push(&cells, false, Status::Ok);
    }
    table
}

/// One row per published element of the nonlinear tensor, and one per note.
#[must_use]
pub fn tensor_and_notes(m: &Material) -> [Table; 2] {
    let columns = [
        column("element", "", "contracted name, in the tensor's own axes"),
        column("pm_per_v", "pm/V", "value"),
        column("known", "", "how it is known"),
        column("source", "", "publication"),
    ];
    let mut tensor = Table::new("tensor", &columns);
    if let Some(n) = &m.file.nonlinearity {
        let n = n.get_ref();
        for (element, value) in &n.elements_pm_per_v {
            let known = n.known.to_string();
            let cells =
                vec![element.as_str().into(), (*value).into(), known.into(), n.source.as_str().into()];
            tensor.push(&cells, false, Status::Ok);
        }
    }
    let columns =
        [column("note", "", "text"), column("known", "", "how it is known"), column("source", "", "where")];
    let mut notes = Table::new("notes", &columns);
    for note in &m.file.note {
        let cells =
            vec![note.text.as_str().into(), note.known.to_string().into(), note.source.as_str().into()];
        notes.push(&cells, false, Status::Ok);
    }
    [tensor, notes]
}

/// For people: everything about one crystal, with sources.
#[must_use]
pub fn detail(m: &Material) -> String {
    let mut out = format!("{}: {} ({})\n", m.id, m.file.name, m.file.formula);
    let mut line = |label: &str, value: String| out.push_str(&format!("  {label:<16}{value}\n"));
    line("point group", m.file.point_group.get_ref().clone());
    line("optic sign", m.optic_sign());
    if let Some(t) = &m.file.transparency {
        line(
            "transparency",
            format!("{} to {} ({}; {})", t.from.get_ref(), t.to.get_ref(), t.known, t.source),
        );
    }
    match &m.file.nonlinearity {
        Some(n) => {
            let n = n.get_ref();
            let list: Vec<String> = n.elements_pm_per_v.iter().map(|(k, v)| format!("{k} {v}")).collect();
            let at = n.wavelength.as_ref().map_or(String::new(), |w| format!(" at {w}"));
            line("d in pm/V", format!("{}{at} ({}; {})", list.join(", "), n.known, n.source));
            line(
                "",
                format!(
                    "dielectric X, Y, Z lie along the tensor's {}, {}, {}",
                    n.frame.x, n.frame.y, n.frame.z
                ),
            );
            if n.kleinman {
                line("", "completed by Kleinman symmetry".into());
            }
            if let Some(convention) = &n.convention {
                line("phi", convention.clone());
            }
        }
        None if crate::material::tensor::is_centrosymmetric(m.file.point_group.get_ref()) => {
            line("d", "none: the crystal has a centre of symmetry and gives no pairs".into());
        }
        None => line("d", "not known here".into()),
    }
    if let Some(e) = &m.file.thermal_expansion {
        line("expansion", format!("stated at {} ({}; {})", e.reference.get_ref(), e.known, e.source));
    }
    for note in &m.file.note {
        line("note", format!("{} ({}; {})", note.text, note.known, note.source));
    }
    for set in m.sets() {
        let default = if set.id == m.default_set().id { " (default)" } else { "" };
        out.push_str(&format!("\n  data set {}{default}\n", set.id));
        let mut line = |label: &str, value: String| out.push_str(&format!("    {label:<14}{value}\n"));
        line("source", format!("{} ({})", set.file.citation, set.file.known));
        if let Some(seen) = &set.file.seen_in {
            line("seen in", seen.clone());
        }
        line("range", format!("{} to {}; indices {}", set.from, set.to, set.file.medium));
        match &set.file.temperature {
            Some(_) => line("temperature", set.temperature.to_string()),
            None => line("temperature", "not stated; taken as 20 degC".into()),
        }
        match &set.file.thermo {
            Some(t) => line("thermo-optic", format!("{} ({})", t.get_ref().source, t.get_ref().known)),
            None if set.has_thermo_optics() => line("thermo-optic", "part of the formula".into()),
            None => line("thermo-optic", "none: holds at its own temperature only".into()),
        }
        if let Some(warning) = &set.file.warning {
            line("warning", warning.clone());
        }
        if let Some(remark) = &set.file.remark {
            line("remark", remark.clone());
        }
        match set.file.independent.as_slice() {
            [] => line(
                "meets",
                "no published number is known here that did not come from its coefficients".into(),
            ),
            all => all.iter().for_each(|i| line("meets", format!("{} ({}; {})", i.what, i.known, i.source))),
        }
    }
    out
}

impl Material {
    /// "uniaxial negative" and the like, from the default set at the geometric middle of its range.
    #[must_use]
    pub fn optic_sign(&self) -> String {
        let set = self.default_set();
        let middle = Wavelength::metres((set.from.si() * set.to.si()).sqrt());
        let Ok(p) = self.principal(set, middle, set.temperature, crate::material::Reach::Within) else {
            return "not known".into();
        };
        let [x, y, z] = p.axes.map(|i| i.n);
        let (kind, positive) = match self.file.optic {
            Optic::Uniaxial => ("uniaxial", z > x),
            // positive where the acute angle between the optic axes is about Z: tan^2 V = (1/x2 - 1/y2)/(1/y2 - 1/z2)
            Optic::Biaxial => {
                let eta = [x, y, z].map(|n| n.powi(-2));
                ("biaxial", eta[0] - eta[1] < eta[1] - eta[2])
            }
        };
        format!("{kind} {}", if positive { "positive" } else { "negative" })
    }
}
