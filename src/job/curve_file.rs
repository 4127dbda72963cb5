//! Curves over wavelength from files: traces of filters, spectra of pumps.

use crate::columns::Columns;
use crate::pairs::Trace;

/// What the second column is.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum Curve {
    /// Transmission of intensity, 0 to 1 or in percent.
    Transmission,
    /// Intensity per wavelength in any unit.
    Intensity,
}

impl Curve {
    /// Columns that are read, with the factor to what is kept.
    fn columns(self) -> &'static [(&'static str, f64)] {
        match self {
            Self::Transmission => &[("transmission", 1.0), ("transmission_percent", 0.01)],
            Self::Intensity => &[("intensity", 1.0)],
        }
    }

    fn header(self) -> String {
        format!("wavelength_nm,{}", self.columns()[0].0)
    }
}

/// Reads `wavelength_nm,transmission` or `wavelength_nm,intensity`, in any order among other columns. Commas, or semicolons
/// or tabs with decimal commas; lines that begin with # are passed over.
///
/// # Errors
/// What cannot be read, with its line.
pub(super) fn read(text: &str, curve: Curve) -> Result<Trace, String> {
    let mut table = Columns::open(text)?;
    let names = std::mem::take(&mut table.names);
    let decimal_comma = table.decimal_comma;
    let place = |name: &str| names.iter().position(|own| own == name);
    let wavelengths = [("wavelength_nm", 1e-9), ("wavelength_um", 1e-6)];
    let column =
        |known: &[(&str, f64)]| known.iter().find_map(|(name, factor)| Some((place(name)?, *factor)));
    let (Some(wavelength), Some(value)) = (column(&wavelengths), column(curve.columns())) else {
        return Err(format!("the first line must name the columns: {}", curve.header()));
    };
    let mut samples = Vec::new();
    let mut lines = Vec::new();
    for record in table.records() {
        let (line, record) = record?;
        let number = |(index, factor): (usize, f64)| -> Result<f64, String> {
            let cell = record.get(index).unwrap_or_default();
            let text = if decimal_comma { cell.replace(',', ".") } else { cell.to_string() };
            let value = text.parse::<f64>().map_err(|_| format!("line {line}: `{cell}` is no number"))?;
            Ok(value * factor)
        };
        let sample = [number(wavelength)?, number(value)?];
        // a slip of the unit would be found nowhere else
        if !(100e-9..=20e-6).contains(&sample[0]) {
            return Err(format!("line {line}: the wavelength is {} nm: look at the unit", sample[0] * 1e9));
        }
        if curve == Curve::Transmission && sample[1] > 1.0 + 1e-9 {
            return Err(format!(
                "line {line}: a transmission of {} is more than all; name the column transmission_percent if it is in \
                 percent",
                sample[1]
            ));
        }
        samples.push(sample);
        lines.push(line);
    }
    Trace::new(samples).map_err(|(index, why)| match lines.get(index) {
        Some(line) => format!("line {line}: {why}"),
        None => why.into(),
    })
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn tables_of_either_kind_are_read() {
        let comma = read("wavelength_nm,transmission\n805,0\n810,0.9\n815,0\n", Curve::Transmission);
        let percent = read(
            "# a spectrometer\nNumber;Transmission_percent;Wavelength_nm\n1;0;805\n2;90,0;810\n3;0;815\n",
            Curve::Transmission,
        );
        let (comma, percent) = (comma.expect("a curve"), percent.expect("a curve"));
        assert!((comma.at(810e-9) - 0.9).abs() < 1e-12 && (percent.at(810e-9) - 0.9).abs() < 1e-12);
        let line = read("wavelength_um\tintensity\n0.404\t0\n0,405\t2000\n0.406\t0\n", Curve::Intensity);
        assert!((line.expect("a curve").at(405e-9) - 2000.0).abs() < 1e-6);
    }

    #[test]
    fn what_cannot_be_read_is_named() {
        let said = |text: &str| read(text, Curve::Transmission).expect_err("no curve");
        assert!(said("805,0\n810,0.9\n815,0\n").contains("wavelength_nm,transmission"));
        assert!(said("").contains("wavelength_nm,transmission"));
        assert!(said("wavelength_nm,intensity\n805,0\n").contains("wavelength_nm,transmission"));
        assert!(said("wavelength_nm,transmission\n805,0\n810,90\n815,0\n").contains("transmission_percent"));
        assert!(said("wavelength_nm,transmission\n0.805,0\n0.810,1\n0.815,0\n").contains("line 2"));
        assert!(
            said("wavelength_nm,transmission\n805,0\n810,0.9\n809,0\n")
                .contains("line 4: wavelengths must rise")
        );
        assert!(said("wavelength_nm,transmission\n805,0\n810,high\n").contains("line 3: `high`"));
        assert!(said("wavelength_nm,transmission\n805,0\n810,nan\n815,0\n").contains("line 3"));
        assert!(said("wavelength_nm,transmission\n805,0\n810,-0.1\n815,0\n").contains("line 3"));
        assert!(said("wavelength_nm,transmission\n805,0\n810,0\n815,0\n").contains("nothing would pass"));
    }
}
