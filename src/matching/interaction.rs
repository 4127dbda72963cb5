//! Processes and interaction types: which polarizations pump, signal and idler have.

use std::fmt;
use std::str::FromStr;

use thiserror::Error;

use crate::optics::{Medium, Polarization, Sheet};

/// pump -> signal + idler, by polarization, as a person writes it.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash)]
pub struct Process {
    /// Of the pump.
    pub pump: Polarization,
    /// Of the signal.
    pub signal: Polarization,
    /// Of the idler.
    pub idler: Polarization,
}

/// A text that is no process.
#[derive(Debug, Clone, PartialEq, Eq, Error)]
pub enum ProcessError {
    /// The shell took `>` as a redirection.
    #[error(
        "`{0}` is only the beginning of a process: the shell took `>` and what follows; quote it, \"e -> o + e\", or write e:o+e"
    )]
    CutByShell(String),
    /// Something else.
    #[error(
        "`{0}` is not a process; write pump -> signal + idler with o and e (or fast and slow in a biaxial crystal), such as \"e -> o + e\" or e:o+e"
    )]
    Unreadable(String),
}

impl FromStr for Process {
    type Err = ProcessError;

    fn from_str(text: &str) -> Result<Self, ProcessError> {
        let trimmed = text.trim().trim_matches(['"', '\'']).trim();
        let unreadable = || ProcessError::Unreadable(trimmed.into());
        let Some((pump, pair)) = trimmed.split_once("->").or_else(|| trimmed.split_once(['\u{2192}', ':']))
        else {
            let start = trimmed.trim_end_matches('-').trim();
            return Err(match polarization(start) {
                Some(_) => ProcessError::CutByShell(trimmed.into()),
                None => unreadable(),
            });
        };
        let (signal, idler) = pair.split_once('+').ok_or_else(unreadable)?;
        match (polarization(pump), polarization(signal), polarization(idler)) {
            (Some(pump), Some(signal), Some(idler)) => Ok(Self { pump, signal, idler }),
            _ => Err(unreadable()),
        }
    }
}

fn polarization(text: &str) -> Option<Polarization> {
    Some(match text.trim() {
        "o" => Polarization::Ordinary,
        "e" => Polarization::Extraordinary,
        "fast" | "f" => Polarization::Fast,
        "slow" | "s" => Polarization::Slow,
        _ => return None,
    })
}

impl fmt::Display for Process {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let Self { pump, signal, idler } = self;
        if f.width().or(f.precision()).is_some() {
            return f.pad(&format!("{pump} -> {signal} + {idler}"));
        }
        for part in [pump.name(), " -> ", signal.name(), " + ", idler.name()] {
            f.write_str(part)?;
        }
        Ok(())
    }
}

/// Interaction type, named by polarizations.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash)]
pub enum Interaction {
    /// All three waves alike.
    Zero,
    /// Fast pump, two slow photons.
    One,
    /// Fast pump, photons of opposite polarization.
    Two,
    /// Named one by one.
    Explicit(Process),
    /// Whatever a poling period can match.
    Any,
}

impl fmt::Display for Interaction {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Self::Zero => f.write_str("type 0"),
            Self::One => f.write_str("type I"),
            Self::Two => f.write_str("type II"),
            Self::Explicit(process) => process.fmt(f),
            Self::Any => f.write_str("any polarizations"),
        }
    }
}

/// The sheets of pump, signal and idler.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash)]
pub struct Roles {
    /// Of the pump.
    pub pump: Sheet,
    /// Of the signal.
    pub signal: Sheet,
    /// Of the idler.
    pub idler: Sheet,
}

impl Roles {
    const fn new(pump: Sheet, signal: Sheet, idler: Sheet) -> Self {
        Self { pump, signal, idler }
    }

    /// The process with signal and idler exchanged.
    #[must_use]
    pub fn exchanged(self) -> Self {
        Self { pump: self.pump, signal: self.idler, idler: self.signal }
    }

    /// In the words of the crystal's kind.
    #[must_use]
    pub fn process(self, pump: &Medium, signal: &Medium, idler: &Medium) -> Process {
        Process {
            pump: pump.polarization(self.pump),
            signal: signal.polarization(self.signal),
            idler: idler.polarization(self.idler),
        }
    }
}

impl Interaction {
    /// The assignments that the interaction stands for, at the wavelengths of the media: the one whose signal is e
    /// (or slow) first. In a uniaxial crystal o and e are looked up at each wavelength.
    ///
    /// # Errors
    /// A sentence where o and e are asked of a biaxial crystal.
    pub fn roles(self, pump: &Medium, signal: &Medium, idler: &Medium) -> Result<Vec<Roles>, String> {
        use Sheet::{Fast, Slow};
        Ok(match self {
            Self::Zero => vec![Roles::new(Slow, Slow, Slow), Roles::new(Fast, Fast, Fast)],
            Self::One => vec![Roles::new(Fast, Slow, Slow)],
            Self::Two => {
                // by name at each wavelength, so that signal and idler stay opposite where the optic sign changes
                let both = |medium: &Medium| {
                    let e = medium.sheet(Polarization::Extraordinary).unwrap_or(Slow);
                    [e, if e == Slow { Fast } else { Slow }]
                };
                let ([e_signal, o_signal], [e_idler, o_idler]) = (both(signal), both(idler));
                vec![Roles::new(Fast, e_signal, o_idler), Roles::new(Fast, o_signal, e_idler)]
            }
            Self::Explicit(process) => {
                let sheets = [(pump, process.pump), (signal, process.signal), (idler, process.idler)];
                let [Some(pump), Some(signal), Some(idler)] = sheets.map(|(medium, p)| medium.sheet(p))
                else {
                    return Err(format!(
                        "`{process}` names o and e, which a biaxial crystal does not have; use fast and slow"
                    ));
                };
                vec![Roles::new(pump, signal, idler)]
            }
            Self::Any => {
                let sheets = [Slow, Fast];
                let all = sheets.into_iter().flat_map(|pump| {
                    sheets
                        .into_iter()
                        .flat_map(move |s| sheets.into_iter().map(move |i| Roles::new(pump, s, i)))
                });
                all.collect()
            }
        })
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn both_spellings_read_alike() {
        let arrow: Process = "e -> o + e".parse().expect("arrow");
        assert_eq!(arrow, "e:o+e".parse().expect("colon"));
        assert_eq!(arrow.to_string(), "e -> o + e");
        assert_eq!("fast->slow+slow".parse::<Process>().expect("words").to_string(), "fast -> slow + slow");
    }

    #[test]
    fn a_shell_that_took_the_arrow_is_recognised() {
        for text in ["e-", "e -", "e"] {
            assert!(matches!(text.parse::<Process>(), Err(ProcessError::CutByShell(_))), "{text}");
        }
        for text in ["", "e -> x + o", "e -> o", "nonsense"] {
            assert!(matches!(text.parse::<Process>(), Err(ProcessError::Unreadable(_))), "{text}");
        }
    }
}
