//! What can go wrong, and the exit status for it.

use twincone::job::JobError;
use twincone::job::setup::SetupError;
use twincone::matching::ConesError;
use twincone::material::MaterialError;
use twincone::pairs::PairsError;

/// A message of one sentence and an exit status.
#[derive(Debug)]
pub struct Failure {
    /// 1: there is no solution; 2: command line or job are wrong; 3: the data do not reach that far; 4: reading or
    /// writing failed.
    pub status: u8,
    /// What is wrong, where, and what to do.
    pub message: String,
}

impl Failure {
    /// Bad usage.
    pub fn usage(message: impl Into<String>) -> Self {
        Self { status: 2, message: message.into() }
    }

    /// File trouble.
    pub fn file(doing: &str, path: &str, error: &std::io::Error) -> Self {
        Self { status: 4, message: format!("cannot {doing} {path}: {error}") }
    }
}

impl From<MaterialError> for Failure {
    fn from(error: MaterialError) -> Self {
        let status = match error {
            MaterialError::Unknown { .. } | MaterialError::UnknownDataset { .. } | MaterialError::File(_) => {
                2
            }
            MaterialError::OutOfRange { .. }
            | MaterialError::NoThermoOptics { .. }
            | MaterialError::TemperatureOutOfRange { .. }
            | MaterialError::NoIndex { .. } => 3,
        };
        Self { status, message: error.to_string() }
    }
}

impl From<JobError> for Failure {
    fn from(error: JobError) -> Self {
        Self::usage(error.to_string())
    }
}

impl From<SetupError> for Failure {
    fn from(error: SetupError) -> Self {
        match error {
            SetupError::Job(error) => error.into(),
            SetupError::Material(error) => error.into(),
            SetupError::NoCut(message) => Self { status: 1, message },
        }
    }
}

impl From<ConesError> for Failure {
    fn from(error: ConesError) -> Self {
        match error {
            ConesError::Material(error) => error.into(),
            ConesError::Description(message) => Self::usage(message),
        }
    }
}

impl From<PairsError> for Failure {
    fn from(error: PairsError) -> Self {
        let status = match error {
            PairsError::Material(error) => return error.into(),
            PairsError::Description(_)
            | PairsError::FixedDirections { .. }
            | PairsError::TightWaist { .. } => 2,
            PairsError::NoTensor { .. } => 3,
            _ => 1,
        };
        Self { status, message: error.to_string() }
    }
}
