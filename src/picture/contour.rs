//! Lines of equal value on a square grid.

/// Values on a square grid, row by row; empty where there is none.
#[derive(Debug, Clone, PartialEq)]
pub struct Grid {
    /// Points along each side.
    pub side: usize,
    /// Of each point.
    pub values: Vec<Option<f64>>,
}

/// Cells whose corners differ by more have no line through them.
const CLIFF: f64 = 2.0;

/// A place on an edge of the grid: between the point and its neighbour along the row (0) or across (1).
type Edge = (usize, usize);

impl Grid {
    fn at(&self, column: usize, row: usize) -> Option<f64> {
        self.values[row * self.side + column]
    }

    /// Smallest and largest value.
    #[must_use]
    pub fn range(&self) -> Option<(f64, f64)> {
        let known = self.values.iter().flatten();
        known.fold(None, |range: Option<(f64, f64)>, v| {
            Some(range.map_or((*v, *v), |(low, high)| (low.min(*v), high.max(*v))))
        })
    }

    /// Lines at one level, as places (column, row) in units of the grid.
    #[must_use]
    pub fn contours(&self, level: f64) -> Vec<Vec<(f64, f64)>> {
        let mut pieces: Vec<[Edge; 2]> = Vec::new();
        for row in 0..self.side - 1 {
            for column in 0..self.side - 1 {
                self.cell(column, row, level, &mut pieces);
            }
        }
        let mut lines = Vec::new();
        while let Some([start, end]) = pieces.pop() {
            let mut line = std::collections::VecDeque::from([start, end]);
            while let Some((at, other)) = next(&pieces, line[line.len() - 1]) {
                line.push_back(other);
                pieces.swap_remove(at);
            }
            while let Some((at, other)) = next(&pieces, line[0]) {
                line.push_front(other);
                pieces.swap_remove(at);
            }
            lines.push(line.into_iter().map(|edge| self.place(edge, level)).collect());
        }
        lines
    }

    /// Which edges of a cell a line joins.
    fn cell(&self, column: usize, row: usize, level: f64, pieces: &mut Vec<[Edge; 2]>) {
        let corners =
            [(0, 0), (1, 0), (1, 1), (0, 1)].map(|(right, down)| self.at(column + right, row + down));
        let [Some(a), Some(b), Some(c), Some(d)] = corners else { return };
        let (low, high) = (a.min(b).min(c).min(d), a.max(b).max(c).max(d));
        if level < low || level > high || high - low > CLIFF {
            return;
        }
        let point = row * self.side + column;
        let edges = [(point, 0), (point + 1, 1), (point + self.side, 0), (point, 1)];
        let above = [a, b, c, d].map(|value| value > level);
        let crossed: Vec<Edge> =
            (0..4).filter(|j| above[*j] != above[(j + 1) % 4]).map(|j| edges[j]).collect();
        match crossed.as_slice() {
            [one, other] => pieces.push([*one, *other]),
            // a saddle: the mean says which corners belong together
            [top, right, bottom, left] => {
                if (0.25 * (a + b + c + d) > level) == above[0] {
                    pieces.extend([[*top, *right], [*bottom, *left]]);
                } else {
                    pieces.extend([[*left, *top], [*right, *bottom]]);
                }
            }
            _ => {}
        }
    }

    fn place(&self, (point, across): Edge, level: f64) -> (f64, f64) {
        let (column, row) = (point % self.side, point / self.side);
        let other = if across == 0 { self.at(column + 1, row) } else { self.at(column, row + 1) };
        let share =
            self.at(column, row).zip(other).map_or(0.5, |(here, there)| (level - here) / (there - here));
        let (x, y) = (column as f64, row as f64);
        if across == 0 { (x + share, y) } else { (x, y + share) }
    }
}

/// A piece that goes on from an edge, with its other end.
fn next(pieces: &[[Edge; 2]], from: Edge) -> Option<(usize, Edge)> {
    let at = pieces.iter().position(|piece| piece.contains(&from))?;
    let [one, other] = pieces[at];
    Some((at, if one == from { other } else { one }))
}

#[cfg(test)]
mod tests {
    use super::*;

    fn grid(of: impl Fn(f64, f64) -> f64) -> Grid {
        let side = 21;
        let values = (0..side * side).map(|n| Some(of((n % side) as f64 - 10.0, (n / side) as f64 - 10.0)));
        Grid { side, values: values.collect() }
    }

    #[test]
    fn a_circle_is_one_closed_line() {
        let lines = grid(|x, y| 0.05 * x.hypot(y)).contours(0.3);
        assert_eq!(lines.len(), 1);
        assert_eq!(lines[0].first(), lines[0].last());
        // linear between neighbours: a chord of one step on a circle of 6 lies 1/(8 * 6) inside
        assert!(lines[0].iter().all(|(x, y)| ((x - 10.0).hypot(y - 10.0) - 6.0).abs() < 0.03));
    }

    #[test]
    fn a_slope_has_a_straight_line_and_a_hole_breaks_it() {
        let mut slope = grid(|x, y| 0.1 * (x + 0.5 * y));
        let lines = slope.contours(0.05);
        assert_eq!(lines.len(), 1);
        assert!(lines[0].iter().all(|(x, y)| (x - 10.0 + 0.5 * (y - 10.0) - 0.5).abs() < 1e-9));
        slope.values[10 * 21 + 10] = None;
        assert_eq!(slope.contours(0.05).len(), 2);
        assert!(grid(|x, _| if x > 0.0 { 3.0 } else { 0.0 }).contours(1.0).is_empty());
    }
}
