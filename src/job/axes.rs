//! The axes of a sweep: which keys run over which values, and which point is where.

use toml::Spanned;

use super::description::{self, Description};
use super::document::{Document, JobError};
use super::keys::{Holds, KeyPath, Unit};
use crate::places::nearest;
use crate::quantity::Temperature;

/// One key and its values.
#[derive(Debug, Clone, PartialEq)]
pub struct Axis {
    /// Which key.
    pub path: KeyPath,
    /// What it takes.
    pub values: Values,
    /// Unit of the values; `None` for words.
    pub unit: Option<Unit>,
}

/// The values of an axis, in the unit of its column.
#[derive(Debug, Clone, PartialEq)]
pub enum Values {
    /// Equally spaced.
    Range(Range),
    /// Numbers one by one.
    Numbers(Vec<f64>),
    /// Words one by one, with their places in the document.
    Words(Vec<Spanned<String>>),
}

/// Equally spaced numbers, both ends included, as the decimals a person expects.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Range {
    from: f64,
    to: f64,
    count: u64,
    /// Numbers are multiples of its inverse; `None` where they are too large or small for that.
    scale: Option<f64>,
}

impl Range {
    fn new(from: f64, to: f64, count: u64) -> Self {
        // 14 digits of the larger end: 0.01 and not 0.010000000000000009
        let digits = 13_i32.saturating_sub(from.abs().max(to.abs()).log10().floor() as i32);
        let scale = (0..=22).contains(&digits).then(|| 10f64.powi(digits));
        Self { from, to, count, scale }
    }

    /// from + (to - from) i/(n - 1)
    fn at(&self, index: u64) -> f64 {
        let Self { from, to, count, scale } = *self;
        if index + 1 == count {
            return if count == 1 { from } else { to };
        }
        let value = from + (to - from) * (index as f64 / (count - 1) as f64);
        scale.map_or(value, |scale| (value * scale).round() / scale + 0.0)
    }
}

/// A value of an axis.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Value<'a> {
    /// In the unit of the column.
    Number(f64),
    /// As it is written in a job.
    Word(&'a str),
}

impl Values {
    /// How many there are.
    #[must_use]
    pub fn count(&self) -> u64 {
        match self {
            Self::Range(range) => range.count,
            Self::Numbers(all) => all.len() as u64,
            Self::Words(all) => all.len() as u64,
        }
    }

    /// One of them.
    #[must_use]
    pub fn at(&self, index: u64) -> Value<'_> {
        match self {
            Self::Range(range) => Value::Number(range.at(index)),
            Self::Numbers(all) => Value::Number(all[index as usize]),
            Self::Words(all) => Value::Word(all[index as usize].get_ref()),
        }
    }
}

impl Axis {
    /// Name of the column that shows the values.
    #[must_use]
    pub fn column(&self) -> String {
        self.path.column(self.unit)
    }

    /// Its words, with their places; `None` where it holds numbers.
    #[must_use]
    pub fn words(&self) -> Option<&[Spanned<String>]> {
        match &self.values {
            Values::Words(all) => Some(all),
            Values::Range(_) | Values::Numbers(_) => None,
        }
    }

    /// A value as a job would write it.
    #[must_use]
    pub fn text(&self, value: Value<'_>) -> String {
        match (value, self.unit) {
            (Value::Number(number), Some(unit)) => format!("{number} {}", unit.name()),
            (Value::Number(number), None) => number.to_string(),
            (Value::Word(word), _) => word.into(),
        }
    }
}

/// Axes that run together, as one dimension of the grid.
#[derive(Debug, Clone, PartialEq)]
pub struct Dimension {
    /// At least one, all of equal length.
    pub axes: Vec<Axis>,
    /// Their length.
    pub count: u64,
}

/// All points of a sweep; the last dimension varies fastest.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct Grid {
    /// In the order of the columns.
    pub dimensions: Vec<Dimension>,
}

impl Grid {
    /// How many points there are.
    #[must_use]
    pub fn count(&self) -> u64 {
        self.dimensions.iter().map(|d| d.count).product()
    }

    /// All axes, in the order of the columns.
    pub fn axes(&self) -> impl Iterator<Item = &Axis> {
        self.dimensions.iter().flat_map(|d| &d.axes)
    }

    /// Where a point lies on each dimension.
    pub fn indices(&self, point: u64) -> impl Iterator<Item = u64> {
        let mut stride = self.count();
        let mut rest = point;
        self.dimensions.iter().map(move |dimension| {
            stride /= dimension.count;
            let index = rest / stride;
            rest %= stride;
            index
        })
    }

    /// The values of all axes at these places on the dimensions, in the order of the columns.
    pub fn values_at(&self, indices: impl Iterator<Item = u64>) -> impl Iterator<Item = Value<'_>> {
        let dimensions = self.dimensions.iter().zip(indices);
        dimensions.flat_map(|(dimension, index)| dimension.axes.iter().map(move |axis| axis.values.at(index)))
    }

    /// The values of all axes at a point, in the order of the columns.
    pub fn values(&self, point: u64) -> impl Iterator<Item = Value<'_>> {
        self.values_at(self.indices(point))
    }

    /// Reads the axes of a `[sweep]`.
    ///
    /// # Errors
    /// What is wrong with an axis, with its place.
    pub(super) fn read(document: &Document, description: &Description) -> Result<Self, JobError> {
        let names: Vec<Option<&str>> =
            description.crystal.iter().map(|c| c.get_ref().name.as_ref().map(|n| &**n.get_ref())).collect();
        let written = description.sweep.as_ref().map_or(&[][..], |sweep| &sweep.axes);
        let mut grid = Self::default();
        let mut points: u64 = 1;
        for axis in written {
            let dimension = dimension(document, axis, &names)?;
            for new in &dimension.axes {
                if let Some(old) = grid.axes().find(|old| old.path.overrides(&new.path, &names)) {
                    return Err(document.fault(axis.span(), &twice(old, new)));
                }
            }
            // beyond this doubles no longer tell points apart, and no computer lives long enough
            points = points.checked_mul(dimension.count).filter(|n| *n <= 1 << 53).ok_or_else(|| {
                document.fault(
                    axis.span(),
                    "the axes together have more points than can be counted; make them coarser",
                )
            })?;
            grid.dimensions.push(dimension);
        }
        Ok(grid)
    }
}

/// Two axes of which one undoes the other.
fn twice(old: &Axis, new: &Axis) -> String {
    match old.path.typed == new.path.typed {
        true => format!("`{}` is an axis twice; leave one out", new.path.typed),
        false => format!("`{}` and `{}` set the same thing; leave one out", old.path.typed, new.path.typed),
    }
}

fn dimension(
    document: &Document,
    written: &Spanned<description::Axis>,
    names: &[Option<&str>],
) -> Result<Dimension, JobError> {
    let axis = written.get_ref();
    if axis.together.is_empty() {
        let axis = read_axis(document, written)?;
        return Ok(Dimension { count: axis.values.count(), axes: vec![axis] });
    }
    if axis.key.is_some() || !axis.values.is_empty() || axis.from.is_some() {
        return Err(document.fault(written.span(), "`together` holds whole axes; give it alone"));
    }
    let mut axes: Vec<Axis> = Vec::new();
    for inner in &axis.together {
        if !inner.get_ref().together.is_empty() {
            return Err(document.fault(inner.span(), "`together` cannot stand within `together`"));
        }
        let new = read_axis(document, inner)?;
        if let Some(first) = axes.first()
            && first.values.count() != new.values.count()
        {
            let message = format!(
                "axes that run together need equally many values: `{}` has {}, `{}` has {}",
                first.path.typed,
                first.values.count(),
                new.path.typed,
                new.values.count()
            );
            return Err(document.fault(inner.span(), &message));
        }
        if let Some(old) = axes.iter().find(|old| old.path.overrides(&new.path, names)) {
            return Err(document.fault(inner.span(), &twice(old, &new)));
        }
        axes.push(new);
    }
    let count = axes.first().map_or(0, |axis| axis.values.count());
    Ok(Dimension { axes, count })
}

fn read_axis(document: &Document, written: &Spanned<description::Axis>) -> Result<Axis, JobError> {
    let axis = written.get_ref();
    let fault = |message: &str| document.fault(written.span(), message);
    let Some(key) = &axis.key else {
        return Err(fault("the axis has no key; write key = \"crystal.tilt\" or another key of the job"));
    };
    let path = KeyPath::find(key.get_ref()).map_err(|why| document.fault(key.span(), &why))?;
    if !path.key.can_be_swept() {
        return Err(document.fault(key.span(), &format!("`{}` cannot be swept", path.typed)));
    }
    let reader = Reader { document, holds: path.key.holds };
    let ranged = axis.from.is_some() || axis.to.is_some() || axis.points.is_some() || axis.step.is_some();
    let (values, unit) = match (ranged, axis.values.as_slice()) {
        (true, [_, ..]) => return Err(fault("give a range (from, to) or values, not both")),
        (false, []) => {
            return Err(fault(
                "the axis has no values; write from, to and points (or step), or values = [...]",
            ));
        }
        (false, list) => reader.list(list)?,
        (true, []) => reader.range(axis, &fault)?,
    };
    Ok(Axis { path, values, unit })
}

/// Reads the values of one axis.
struct Reader<'a> {
    document: &'a Document,
    holds: Holds,
}

impl Reader<'_> {
    fn number(&self, text: &description::Text) -> Result<(f64, Unit), JobError> {
        self.holds.read(text.get_ref()).map_err(|why| self.document.fault(text.span(), &why))
    }

    fn list(&self, list: &[description::Text]) -> Result<(Values, Option<Unit>), JobError> {
        if !self.holds.is_quantity() {
            let word = |text: &description::Text| Ok(Spanned::new(text.span(), self.word(text)?));
            let words: Result<Vec<Spanned<String>>, JobError> = list.iter().map(word).collect();
            return Ok((Values::Words(words?), None));
        }
        let mut numbers = Vec::with_capacity(list.len());
        let mut unit = None;
        for text in list {
            let (number, own) = self.number(text)?;
            if *unit.get_or_insert(own) != own {
                let message = format!("`{}` is of another kind than the values before it", text.get_ref());
                return Err(self.document.fault(text.span(), &message));
            }
            numbers.push(number);
        }
        Ok((Values::Numbers(numbers), unit))
    }

    /// One of the words that the key holds.
    fn word(&self, text: &description::Text) -> Result<String, JobError> {
        let word = text.get_ref().to_string();
        // rows are lines
        if word.chars().any(char::is_control) {
            return Err(self
                .document
                .fault(text.span(), "a value of an axis stands on one line; take the line break out"));
        }
        let known: &[&str] = match self.holds {
            Holds::Word(known) => known,
            _ => &["true", "false"],
        };
        if known.is_empty() || known.contains(&word.as_str()) {
            return Ok(word);
        }
        let near = nearest(&word, known.iter().copied());
        let hint = near.map_or(String::new(), |near| format!("; did you mean `{near}`?"));
        let message = format!("`{word}` is none of {}{hint}", known.join(", "));
        Err(self.document.fault(text.span(), &message))
    }

    fn range(
        &self,
        axis: &description::Axis,
        fault: &impl Fn(&str) -> JobError,
    ) -> Result<(Values, Option<Unit>), JobError> {
        let (Some(from_text), Some(to_text)) = (&axis.from, &axis.to) else {
            return Err(fault("a range needs from and to"));
        };
        if !self.holds.is_quantity() {
            return Err(fault("the key holds words: list them, values = [...]"));
        }
        let ((from, unit), (to, other)) = (self.number(from_text)?, self.number(to_text)?);
        if unit != other {
            return Err(self.document.fault(to_text.span(), "from and to are of different kinds"));
        }
        let count = match (&axis.points, &axis.step) {
            (Some(_), Some(step)) => {
                return Err(self.document.fault(step.span(), "give points or step, not both"));
            }
            (None, None) => return Err(fault("a range needs points (how many) or step")),
            (Some(points), None) => {
                let count = *points.get_ref();
                if count == 0 || (count == 1 && from != to) {
                    let message = "points counts both ends: it must be at least 2";
                    return Err(self.document.fault(points.span(), message));
                }
                count
            }
            (None, Some(step)) => self.steps(step, from, to, unit)?,
        };
        Ok((Values::Range(Range::new(from, to, count)), Some(unit)))
    }

    /// Points of a range by step, which must divide it.
    fn steps(&self, text: &description::Text, from: f64, to: f64, unit: Unit) -> Result<u64, JobError> {
        let (step, own) = match self.holds {
            // a step of kelvins is not offset by 273.15
            Holds::Temperature => {
                let step = Temperature::difference(text.get_ref());
                (step.map_err(|why| self.document.fault(text.span(), &why))?, unit)
            }
            _ => self.number(text)?,
        };
        if own != unit {
            return Err(self.document.fault(text.span(), "the step is of another kind than from and to"));
        }
        let steps = (to - from).abs() / step.abs();
        let whole = steps.round();
        if !whole.is_finite() || (steps - whole).abs() > 1e-9 * whole.max(1.0) || whole >= 1e15 {
            let message = format!(
                "the step {} does not divide the range from {from} to {to} {}; change one of them, or give points",
                text.get_ref(),
                unit.name()
            );
            return Err(self.document.fault(text.span(), &message));
        }
        Ok(whole as u64 + 1)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn values_of_a_range_are_the_decimals_a_person_expects() {
        for (index, expected) in [(0, -1.0), (101, 0.01), (100, 0.0), (250, 1.5), (500, 4.0)] {
            assert_eq!(Range::new(-1.0, 4.0, 501).at(index), expected);
        }
        assert_eq!(Range::new(404.0, 406.0, 21).at(1), 404.1);
        assert_eq!(Range::new(2.0, 2.0, 1).at(0), 2.0);
        assert_eq!(Range::new(0.0, 0.0, 2).at(0), 0.0);
        // what is no short decimal keeps 14 digits
        assert!((Range::new(0.0, 1.0, 4).at(1) - 1.0 / 3.0).abs() < 1e-13);
    }
}
