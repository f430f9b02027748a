//! Finding room for words between curves and other words.

use super::canvas::{Anchor, Canvas, Ink, LABEL_PT, Label, Stroke};
use super::geometry::{Point, Rect, clip_segment, distance_to_segment, length};

/// White kept round words, pt.
const AIR_PT: f64 = 1.5;
/// Distance of two lines of words, pt.
pub const LINE_PT: f64 = 10.0;
/// Thin line from words to what they name.
const LEADER: Stroke = Stroke::solid(0.5, Ink::Black);
/// Anchors tried along a curve.
const ANCHORS: usize = 80;

/// What words must not cover.
#[derive(Debug, Clone, Default)]
pub struct Taken {
    paths: Vec<Vec<Point>>,
    boxes: Vec<Rect>,
    grid: Vec<(Point, Point)>,
}

impl Taken {
    /// Everything set in words so far.
    pub fn words_of(canvas: &Canvas) -> Self {
        let mut taken = Taken::default();
        taken.add_words(canvas);
        taken
    }

    /// Adds everything set in words so far.
    pub fn add_words(&mut self, canvas: &Canvas) {
        self.boxes.extend(canvas.label_areas());
    }

    /// Adds curves as drawn on the sheet.
    pub fn add_paths(&mut self, paths: &[Vec<Point>]) {
        self.paths.extend_from_slice(paths);
    }

    /// Adds the grid of a window: words keep clear of it where there is room beside it.
    pub fn add_grid(&mut self, lines: Vec<(Point, Point)>) {
        self.grid.extend(lines);
    }

    /// Adds a box.
    pub fn add_box(&mut self, area: Rect) {
        self.boxes.push(area);
    }

    /// How much of what is there a box would cover: length of curves, and 1000 for each box.
    pub fn covered(&self, area: Rect) -> f64 {
        let area = area.grown(AIR_PT);
        let boxes = self.boxes.iter().filter(|b| b.meets(area)).count();
        let curves: f64 = self
            .paths
            .iter()
            .flat_map(|path| path.windows(2))
            .filter_map(|w| clip_segment(w[0], w[1], area))
            .map(|(a, b)| length(a, b).max(0.1))
            .sum();
        boxes as f64 * 1000.0 + curves
    }

    /// Whether a grid line runs through a box.
    fn on_grid(&self, area: Rect) -> bool {
        self.grid
            .iter()
            .any(|&(a, b)| clip_segment(a, b, area.grown(-0.5)).is_some())
    }

    /// The first of the boxes that covers nothing and lies on `sheet`; one clear of the grid is
    /// preferred.
    pub fn first_free(&self, sheet: Rect, boxes: impl IntoIterator<Item = Rect>) -> Option<Rect> {
        let free: Vec<Rect> = boxes
            .into_iter()
            .filter(|&area| sheet.holds(area) && self.covered(area) == 0.0)
            .collect();
        let clear = free.iter().find(|&&area| !self.on_grid(area));
        clear.or(free.first()).copied()
    }

    /// Distance of a point from the nearest curve.
    fn distance(&self, point: Point) -> f64 {
        self.paths
            .iter()
            .flat_map(|path| path.windows(2))
            .map(|w| distance_to_segment(point, w[0], w[1]))
            .fold(f64::INFINITY, f64::min)
    }
}

/// Words of one or more lines, to be set as one block.
#[derive(Debug, Clone, PartialEq)]
pub struct Block {
    /// Each line and whether it is bold.
    pub lines: Vec<(String, bool)>,
    /// How the lines stand to each other.
    pub anchor: Anchor,
}

impl Block {
    /// One line.
    pub fn line(words: &str, bold: bool) -> Self {
        Block {
            lines: vec![(words.to_owned(), bold)],
            anchor: Anchor::Start,
        }
    }

    /// Width and height, pt.
    pub fn size(&self) -> (f64, f64) {
        let width = self
            .lines
            .iter()
            .map(|(words, bold)| super::widths::width_pt(words, LABEL_PT, *bold))
            .fold(0.0, f64::max);
        let one = Label::new(0.0, 0.0, "x").area();
        let height = one.y1 - one.y0 + LINE_PT * (self.lines.len().max(1) - 1) as f64;
        (width, height)
    }

    /// Sets the block into a box of its size, on white where `blank`.
    pub fn set(&self, canvas: &mut Canvas, area: Rect, blank: bool) {
        if blank {
            canvas.blank(area.grown(AIR_PT));
        }
        let x = match self.anchor {
            Anchor::Start => area.x0,
            Anchor::Middle => (area.x0 + area.x1) / 2.0,
            Anchor::End => area.x1,
        };
        let ascent = -Label::new(0.0, 0.0, "x").area().y0;
        for (row, (words, bold)) in self.lines.iter().enumerate() {
            let y = area.y0 + ascent + LINE_PT * row as f64;
            let label = Label::new(x, y, words.clone()).anchor(self.anchor);
            canvas.words(if *bold { label.bold() } else { label });
        }
    }
}

/// Breaks words into lines no wider than `width`, where they can be broken.
pub fn wrapped(words: &str, width: f64) -> Vec<String> {
    let mut lines: Vec<String> = Vec::new();
    for word in words.split(' ').filter(|w| !w.is_empty()) {
        match lines.last_mut() {
            Some(line)
                if super::widths::width_pt(&format!("{line} {word}"), LABEL_PT, false) <= width =>
            {
                line.push(' ');
                line.push_str(word);
            }
            _ => lines.push(word.to_owned()),
        }
    }
    lines
}

/// Names a curve: sets the block beside the point of `curve` that stands clearest of everything
/// else, with a thin line to it where it is not next to it. Returns whether there was room.
pub fn name_curve(
    canvas: &mut Canvas,
    taken: &mut Taken,
    curve: &[Vec<Point>],
    block: &Block,
    within: Rect,
) -> bool {
    let points: Vec<Point> = curve.iter().flatten().copied().collect();
    if points.is_empty() {
        return false;
    }
    let points = closer(&points);
    let every = points.len().div_ceil(ANCHORS);
    // A curve may be nearer to one side of another than its own width: farther than this is far.
    const CLEAR_PT: f64 = 12.0;
    let mut anchors: Vec<(f64, Point)> = points
        .iter()
        .step_by(every)
        .map(|&p| (taken.distance(p).min(CLEAR_PT), p))
        .collect();
    // Clearest first; of equals the earliest.
    anchors.sort_by(|a, b| b.0.total_cmp(&a.0));
    let mut all = taken.clone();
    all.add_paths(curve);
    let (width, height) = block.size();
    // Near to the curve and clear of the grid; else near; else farther off, with a line to it.
    for (reach, off_grid) in [
        (5.0, true),
        (9.0, true),
        (5.0, false),
        (9.0, false),
        (16.0, false),
        (24.0, false),
    ] {
        for &(_, (x, y)) in &anchors {
            let beside = [
                (x + reach, y - height / 2.0),
                (x - reach - width, y - height / 2.0),
                (x - width / 2.0, y - reach - height),
                (x - width / 2.0, y + reach),
                (x + reach, y - reach - height),
                (x + reach, y + reach),
                (x - reach - width, y - reach - height),
                (x - reach - width, y + reach),
            ];
            let boxes = beside.map(|(x0, y0)| Rect::new(x0, y0, x0 + width, y0 + height));
            let Some(area) = all.first_free(within, boxes) else {
                continue;
            };
            if off_grid && all.on_grid(area) {
                continue;
            }
            block.set(canvas, area, false);
            if reach > 9.0 {
                let near = (x.clamp(area.x0, area.x1), y.clamp(area.y0, area.y1));
                canvas.line((x, y), near, LEADER);
            }
            taken.add_box(area);
            return true;
        }
    }
    false
}

/// The points of a path, with others between those that stand far apart.
fn closer(points: &[Point]) -> Vec<Point> {
    const APART_PT: f64 = 6.0;
    let mut all: Vec<Point> = points.first().copied().into_iter().collect();
    for pair in points.windows(2) {
        let (a, b) = (pair[0], pair[1]);
        let count = libm::ceil(length(a, b) / APART_PT).max(1.0);
        let mut k = 1.0;
        while k <= count {
            let part = k / count;
            all.push((a.0 + part * (b.0 - a.0), a.1 + part * (b.1 - a.1)));
            k += 1.0;
        }
    }
    all
}

/// Sets words at the right ends of lines, one below the other where the lines end close together;
/// words of lines that end in one place share a line.
pub fn end_labels(canvas: &mut Canvas, x: f64, ends: &[(f64, &str)], within: (f64, f64)) {
    let mut sorted: Vec<(f64, String)> = Vec::new();
    let mut ends: Vec<(f64, &str)> = ends.iter().copied().filter(|e| e.0.is_finite()).collect();
    ends.sort_by(|a, b| a.0.total_cmp(&b.0));
    for (y, words) in ends {
        match sorted.last_mut() {
            Some((last, together)) if y - *last < LINE_PT * 0.5 => {
                together.push_str(", ");
                together.push_str(words);
            }
            Some((last, _)) => {
                let y = y.max(*last + LINE_PT);
                sorted.push((y, words.to_owned()));
            }
            None => sorted.push((y, words.to_owned())),
        }
    }
    let over = sorted.last().map_or(0.0, |(y, _)| (y - within.1).max(0.0));
    for (y, words) in sorted {
        let y = (y - over).max(within.0) + super::panel::HALF_FIGURE_PT;
        canvas.words(Label::new(x, y, words).bold());
    }
}

/// Rows for words of these left ends and widths, so that none touches the one before it in its
/// row: 0 for the first row, 1 for the one above it, and so on.
pub fn rows(words: &[(f64, f64)]) -> Vec<usize> {
    let mut ends: Vec<f64> = Vec::new();
    words
        .iter()
        .map(|&(x, width)| {
            let row = ends.iter().position(|&end| end + 4.0 <= x);
            let row = row.unwrap_or_else(|| {
                ends.push(f64::NEG_INFINITY);
                ends.len() - 1
            });
            ends[row] = x + width;
            row
        })
        .collect()
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn words_that_would_touch_go_a_row_up() {
        assert_eq!(rows(&[(0.0, 10.0), (12.0, 10.0), (30.0, 5.0)]), [0, 1, 0]);
    }

    #[test]
    fn words_are_broken_at_spaces_only() {
        assert_eq!(
            wrapped("PV was drifting", 45.0),
            ["PV was", "drifting"].map(str::to_owned)
        );
        assert_eq!(wrapped("unbreakable", 1.0), ["unbreakable".to_owned()]);
    }

    #[test]
    fn a_name_stands_clear_of_both_curves() {
        let mut canvas = Canvas::new(100.0, 50.0);
        let sheet = canvas.area();
        let flat = vec![vec![(0.0, 70.0), (280.0, 70.0)]];
        let rising = vec![vec![(0.0, 70.0), (140.0, 70.0), (280.0, 20.0)]];
        let mut taken = Taken::default();
        taken.add_paths(&flat);
        let named = name_curve(
            &mut canvas,
            &mut taken,
            &rising,
            &Block::line("as found", false),
            sheet,
        );
        assert!(named);
        let area = canvas.label_areas()[0];
        taken.boxes.clear();
        taken.add_paths(&rising);
        assert_eq!(taken.covered(area), 0.0);
        assert!(sheet.holds(area));
    }

    #[test]
    fn where_there_is_no_room_nothing_is_set() {
        let mut canvas = Canvas::new(10.0, 3.0);
        let curve = vec![vec![(0.0, 4.0), (28.0, 4.0)]];
        let sheet = canvas.area();
        let block = Block::line("as found", false);
        let mut taken = Taken::default();
        assert!(!name_curve(&mut canvas, &mut taken, &curve, &block, sheet));
        assert!(canvas.label_areas().is_empty());
    }

    #[test]
    fn labels_at_line_ends_keep_their_distance() {
        let mut canvas = Canvas::new(100.0, 50.0);
        let ends = [(50.0, "PV"), (51.0, "SP"), (56.0, "predicted")];
        end_labels(&mut canvas, 200.0, &ends, (0.0, 100.0));
        let words: Vec<&str> = canvas.labels().map(|l| l.words.as_str()).collect();
        assert_eq!(words, ["PV, SP", "predicted"]);
        let areas = canvas.label_areas();
        assert!(!areas[0].meets(areas[1]));
    }
}
