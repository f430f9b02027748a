//! Points, boxes and lines on the page, all in pt; the origin is the upper left corner.

/// A place on the page, or a sample (time, value) before it is put there.
pub type Point = (f64, f64);

/// An upright box: `x0 <= x1`, `y0 <= y1`, y downwards.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Rect {
    /// Left edge.
    pub x0: f64,
    /// Upper edge.
    pub y0: f64,
    /// Right edge.
    pub x1: f64,
    /// Lower edge.
    pub y1: f64,
}

impl Rect {
    /// A box from its left, upper, right and lower edges.
    pub fn new(x0: f64, y0: f64, x1: f64, y1: f64) -> Self {
        Rect { x0, y0, x1, y1 }
    }

    /// The same box with `by` more on every side.
    pub fn grown(self, by: f64) -> Self {
        Rect::new(self.x0 - by, self.y0 - by, self.x1 + by, self.y1 + by)
    }

    /// Whether the two share an area.
    pub fn meets(self, other: Rect) -> bool {
        self.x0 < other.x1 && other.x0 < self.x1 && self.y0 < other.y1 && other.y0 < self.y1
    }

    /// Whether `inner` lies wholly in this one.
    pub fn holds(self, inner: Rect) -> bool {
        self.x0 <= inner.x0 && inner.x1 <= self.x1 && self.y0 <= inner.y0 && inner.y1 <= self.y1
    }
}

/// The part of a line from `a` to `b` inside the box; `None` where it does not touch it.
///
/// Y.-D. Liang, B.A. Barsky, "A new concept and method for line clipping", ACM Transactions on
/// Graphics 3 (1984).
pub fn clip_segment(a: Point, b: Point, within: Rect) -> Option<(Point, Point)> {
    let (dx, dy) = (b.0 - a.0, b.1 - a.1);
    if !(dx.is_finite() && dy.is_finite()) {
        return None;
    }
    let (mut enters, mut leaves) = (0.0_f64, 1.0_f64);
    for (direction, distance) in [
        (-dx, a.0 - within.x0),
        (dx, within.x1 - a.0),
        (-dy, a.1 - within.y0),
        (dy, within.y1 - a.1),
    ] {
        if direction == 0.0 {
            if distance < 0.0 {
                return None;
            }
        } else if direction < 0.0 {
            enters = enters.max(distance / direction);
        } else {
            leaves = leaves.min(distance / direction);
        }
    }
    (enters <= leaves).then(|| {
        let at = |part: f64| {
            if part <= 0.0 {
                a
            } else if part >= 1.0 {
                b
            } else {
                (a.0 + part * dx, a.1 + part * dy)
            }
        };
        (at(enters), at(leaves))
    })
}

/// The parts of a path inside the box, each a path of its own.
pub fn clip_path(path: &[Point], within: Rect) -> Vec<Vec<Point>> {
    let mut parts: Vec<Vec<Point>> = Vec::new();
    let mut open = false;
    for pair in path.windows(2) {
        let Some((from, to)) = clip_segment(pair[0], pair[1], within) else {
            open = false;
            continue;
        };
        match parts.last_mut() {
            Some(part) if open && part.last() == Some(&from) => part.push(to),
            _ => parts.push(vec![from, to]),
        }
        open = to == pair[1];
    }
    parts
}

/// The strokes of a dashed path: `on` pt drawn, `off` pt left out, all along it.
pub fn dashes(path: &[Point], on: f64, off: f64) -> Vec<Vec<Point>> {
    let mut strokes = Vec::new();
    let Some(&first) = path.first() else {
        return strokes;
    };
    if !(on > 0.0 && off > 0.0) {
        return vec![path.to_vec()];
    }
    let mut stroke = vec![first];
    let mut drawing = true;
    let mut left = on;
    for pair in path.windows(2) {
        let (a, b) = (pair[0], pair[1]);
        let length = length(a, b);
        let mut done = 0.0;
        while length - done > left {
            done += left;
            let part = done / length;
            let at = (a.0 + part * (b.0 - a.0), a.1 + part * (b.1 - a.1));
            if drawing {
                stroke.push(at);
                strokes.push(std::mem::take(&mut stroke));
            } else {
                stroke = vec![at];
            }
            drawing = !drawing;
            left = if drawing { on } else { off };
        }
        left -= length - done;
        if drawing {
            stroke.push(b);
        }
    }
    if stroke.len() > 1 {
        strokes.push(stroke);
    }
    strokes
}

/// Distance of two points. `sqrt` is exact to the last bit everywhere, `hypot` is not.
pub fn length(a: Point, b: Point) -> f64 {
    let (dx, dy) = (b.0 - a.0, b.1 - a.1);
    (dx * dx + dy * dy).sqrt()
}

/// Distance of a point from the line between two others.
pub fn distance_to_segment(p: Point, a: Point, b: Point) -> f64 {
    let (dx, dy) = (b.0 - a.0, b.1 - a.1);
    let square = dx * dx + dy * dy;
    if square == 0.0 {
        return length(p, a);
    }
    let part = (((p.0 - a.0) * dx + (p.1 - a.1) * dy) / square).clamp(0.0, 1.0);
    length(p, (a.0 + part * dx, a.1 + part * dy))
}

/// A long path with fewer points: of each `column` (in the unit of x) its first, lowest, highest
/// and last point stay, so that no spike is lost and the line still meets itself.
pub fn thin(path: &[Point], column: f64) -> Vec<Point> {
    if column.is_nan() || column <= 0.0 || path.len() < 5 {
        return path.to_vec();
    }
    let mut kept = Vec::new();
    let mut begin = 0;
    while begin < path.len() {
        let edge = path[begin].0 + column;
        let mut end = begin + 1;
        while end < path.len() && path[end].0 < edge {
            end += 1;
        }
        let (mut low, mut high) = (begin, begin);
        for k in begin..end {
            if path[k].1 < path[low].1 {
                low = k;
            }
            if path[k].1 > path[high].1 {
                high = k;
            }
        }
        let mut stay = [begin, low, high, end - 1];
        stay.sort_unstable();
        for (place, &k) in stay.iter().enumerate() {
            if place == 0 || stay[place - 1] != k {
                kept.push(path[k]);
            }
        }
        begin = end;
    }
    kept
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    #[test]
    fn a_path_is_cut_at_the_box_and_goes_on_behind_it() {
        let within = Rect::new(0.0, 0.0, 10.0, 10.0);
        let parts = clip_path(&[(0.0, 5.0), (5.0, 5.0), (5.0, -5.0), (10.0, 5.0)], within);
        assert_eq!(
            parts,
            vec![
                vec![(0.0, 5.0), (5.0, 5.0), (5.0, 0.0)],
                vec![(7.5, 0.0), (10.0, 5.0)]
            ]
        );
        assert_eq!(clip_segment((0.0, f64::NAN), (1.0, 1.0), within), None);
    }

    #[test]
    fn dashes_have_their_lengths_round_a_corner() {
        let strokes = dashes(&[(0.0, 0.0), (4.0, 0.0), (4.0, 10.0)], 3.0, 2.0);
        assert_eq!(
            strokes,
            vec![
                vec![(0.0, 0.0), (3.0, 0.0)],
                vec![(4.0, 1.0), (4.0, 4.0)],
                vec![(4.0, 6.0), (4.0, 9.0)]
            ]
        );
    }

    #[test]
    fn distances_are_those_of_the_ruler() {
        assert_eq!(
            distance_to_segment((0.0, 3.0), (-1.0, 0.0), (1.0, 0.0)),
            3.0
        );
        assert_eq!(distance_to_segment((4.0, 4.0), (0.0, 0.0), (1.0, 0.0)), 5.0);
    }

    proptest! {
        #[test]
        fn thinning_keeps_extremes_ends_and_order(
            values in prop::collection::vec(-1e3..1e3_f64, 1..400),
            column in 0.5..50.0_f64,
        ) {
            let path: Vec<Point> =
                values.iter().enumerate().map(|(k, &v)| (k as f64, v)).collect();
            let kept = thin(&path, column);
            let highest = |p: &[Point]| p.iter().map(|q| q.1).fold(f64::MIN, f64::max);
            let lowest = |p: &[Point]| p.iter().map(|q| q.1).fold(f64::MAX, f64::min);
            prop_assert_eq!(highest(&kept), highest(&path));
            prop_assert_eq!(lowest(&kept), lowest(&path));
            prop_assert_eq!(kept.first(), path.first());
            prop_assert_eq!(kept.last(), path.last());
            prop_assert!(kept.windows(2).all(|w| w[0].0 < w[1].0));
            prop_assert!(kept.len() as f64 <= 4.0 * (path.len() as f64 / column + 2.0));
        }
    }
}
