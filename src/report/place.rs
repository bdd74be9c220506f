//! Places labels so that none covers another.
//!
//! Two tasks: labels of sticks stand in rows above them, tied to their sticks by lines that never
//! cross; labels of bands stand above the trace, each as low and as near to its maximum as
//! what is already there allows.

/// Where a label of a stick goes.
#[derive(Debug, Clone, PartialEq)]
pub struct Seat {
    /// Row, 0 nearest to the sticks.
    pub row: usize,
    /// Centre of the line to the label in each row that it passes, its own included: one entry
    /// per row from 0 to `row`.
    pub path: Vec<f64>,
}

/// Space between neighbours in a row.
const GAP: f64 = 4.0;
/// Room that a passing line takes in a row.
const SLOT: f64 = 2.0;
/// A label may stand this far from its stick before another row is opened.
const FAR: f64 = 26.0;
/// Most rows.
pub const MOST_ROWS: usize = 10;

/// Seats for labels of the given anchors (rising) and widths between two edges; `None` where they
/// do not fit into [`MOST_ROWS`] rows.
///
/// Labels take the rows in turn. Within a row the order is that of the anchors, and the sum of
/// squared distances from them is least; a label of a higher row keeps a slot in each row below
/// for its line, so that lines cross neither labels nor each other.
pub fn seats(anchors: &[f64], widths: &[f64], edges: [f64; 2]) -> Option<Vec<Seat>> {
    let mut best: Option<(f64, Vec<Seat>)> = None;
    for rows in 1..=MOST_ROWS.min(anchors.len().max(1)) {
        let Some(seats) = seats_in(rows, anchors, widths, edges) else {
            continue;
        };
        let distance = |(seat, anchor): (&Seat, &f64)| (seat.path[seat.row] - anchor).abs();
        let farthest = seats.iter().zip(anchors).map(distance).fold(0.0, f64::max);
        // Another row must be worth its height.
        if best.as_ref().is_none_or(|(far, _)| farthest < 0.7 * far) {
            best = Some((farthest, seats));
        }
        if farthest <= FAR || rows >= 4 {
            break;
        }
    }
    best.map(|(_, seats)| seats)
}

fn seats_in(rows: usize, anchors: &[f64], widths: &[f64], edges: [f64; 2]) -> Option<Vec<Seat>> {
    let mut seats: Vec<Seat> = (0..anchors.len())
        .map(|i| Seat {
            row: i % rows,
            path: Vec::new(),
        })
        .collect();
    for row in 0..rows {
        let here: Vec<usize> = (0..seats.len()).filter(|&i| seats[i].row >= row).collect();
        let wanted: Vec<f64> = here.iter().map(|&i| anchors[i]).collect();
        let room = |i: &usize| match seats[*i].row == row {
            true => widths[*i],
            false => SLOT,
        };
        let rooms: Vec<f64> = here.iter().map(room).collect();
        let placed = spread(&wanted, &rooms, edges)?;
        for (i, x) in here.into_iter().zip(placed) {
            seats[i].path.push(x);
        }
    }
    Some(seats)
}

/// Centres in the order given, no two of the rooms overlapping, nearest to the wanted ones in
/// the sense of least squares: isotonic regression by pooling neighbours (R. E. Barlow et al.,
/// Statistical inference under order restrictions, 1972).
fn spread(wanted: &[f64], rooms: &[f64], [low, high]: [f64; 2]) -> Option<Vec<f64>> {
    let total: f64 = rooms.iter().sum::<f64>() + GAP * rooms.len().saturating_sub(1) as f64;
    if total > high - low {
        return None;
    }
    // With the rooms of all that stands left of it taken off, a centre need only not fall.
    let mut offsets = Vec::with_capacity(rooms.len());
    let mut taken = 0.0;
    for room in rooms {
        offsets.push(taken + 0.5 * room);
        taken += room + GAP;
    }
    let mut pools: Vec<(f64, usize)> = Vec::new();
    for (x, offset) in wanted.iter().zip(&offsets) {
        let mut pool = (x - offset, 1);
        while let Some(&(mean, n)) = pools.last() {
            if mean <= pool.0 {
                break;
            }
            let count = n + pool.1;
            pool = (
                (mean * n as f64 + pool.0 * pool.1 as f64) / count as f64,
                count,
            );
            pools.pop();
        }
        pools.push(pool);
    }
    let free = low.max(high - total);
    let means = pools
        .into_iter()
        .flat_map(|(mean, n)| std::iter::repeat_n(mean.clamp(low, free), n));
    Some(means.zip(&offsets).map(|(m, o)| m + o).collect())
}

/// A rectangle: left, top, right, bottom; y runs downwards.
pub type Rect = [f64; 4];

/// Whether two rectangles share more than an edge.
pub fn overlap(a: &Rect, b: &Rect) -> bool {
    a[0] < b[2] && b[0] < a[2] && a[1] < b[3] && b[1] < a[3]
}

/// The upper edge of what is drawn in a panel: one height per column of the page.
#[derive(Debug, Clone)]
pub struct Skyline {
    left: f64,
    tops: Vec<f64>,
}

/// Width of a column of the skyline.
const COLUMN: f64 = 0.5;

impl Skyline {
    /// Nothing drawn yet between two edges of a panel with this floor.
    pub fn new([left, right]: [f64; 2], floor: f64) -> Self {
        let columns = ((right - left) / COLUMN).ceil().max(1.0) as usize;
        Skyline {
            left,
            tops: vec![floor; columns],
        }
    }

    fn column(&self, x: f64) -> usize {
        let last = self.tops.len() as f64 - 1.0;
        ((x - self.left) / COLUMN).clamp(0.0, last) as usize
    }

    /// Raises the skyline along a line through points.
    pub fn trace(&mut self, points: &[[f64; 2]]) {
        for pair in points.windows(2) {
            let (a, b) = (pair[0], pair[1]);
            let (first, last) = (self.column(a[0].min(b[0])), self.column(a[0].max(b[0])));
            for column in first..=last {
                let x = self.left + (column as f64 + 0.5) * COLUMN;
                let share = if b[0] == a[0] {
                    0.0
                } else {
                    (x - a[0]) / (b[0] - a[0])
                };
                let y = a[1] + share.clamp(0.0, 1.0) * (b[1] - a[1]);
                self.tops[column] = self.tops[column].min(y);
            }
        }
        for p in points {
            self.point(p[0], p[1]);
        }
    }

    /// Raises the skyline at a point.
    pub fn point(&mut self, x: f64, y: f64) {
        let column = self.column(x);
        self.tops[column] = self.tops[column].min(y);
    }

    /// Highest place (smallest y) between two places.
    pub fn top(&self, from: f64, to: f64) -> f64 {
        let tops = &self.tops[self.column(from)..=self.column(to)];
        tops.iter().copied().fold(f64::INFINITY, f64::min)
    }
}

/// A label that stands above the trace.
#[derive(Debug, Clone, PartialEq)]
pub struct Perch {
    /// Left, top, right, bottom.
    pub bounds: Rect,
    /// Line from the trace to the label, where it does not stand right above: x, from y, to y.
    pub leader: Option<[f64; 3]>,
}

/// Labels above a skyline.
pub struct Percher<'a> {
    skyline: &'a Skyline,
    edges: [f64; 2],
    taken: Vec<Rect>,
    leaders: Vec<Rect>,
}

/// Space between the trace and a label.
const AIR: f64 = 2.5;
/// A label this far above its foot gets a leader.
const LOOSE: f64 = 7.0;

impl<'a> Percher<'a> {
    /// A percher between two edges of the page.
    pub fn new(skyline: &'a Skyline, edges: [f64; 2]) -> Self {
        Percher {
            skyline,
            edges,
            taken: Vec::new(),
            leaders: Vec::new(),
        }
    }

    /// Places a label of this size over `x`, avoiding the columns `keep_off` where it can. The
    /// label always spans its `x`, so that a vertical leader suffices.
    pub fn perch(&mut self, x: f64, [width, height]: [f64; 2], keep_off: &[f64]) -> Perch {
        let near = |r: &&Rect| r[0] - 1.0 < x && x < r[2] + 1.0;
        let below = self.taken.iter().filter(near).map(|r| r[1]);
        let foot = below.fold(self.skyline.top(x - 0.5, x + 0.5), f64::min);
        let mut best: Option<(f64, Perch)> = None;
        for step in -8..=8 {
            let centre = x + f64::from(step) / 16.0 * width;
            let low = self.edges[0] + 0.5 * width;
            let centre = centre.clamp(low, (self.edges[1] - 0.5 * width).max(low));
            let (left, right) = (centre - 0.5 * width, centre + 0.5 * width);
            let mut bottom = self.skyline.top(left - 1.0, right + 1.0) - AIR;
            let mut bounds = [left, bottom - height, right, bottom];
            let obstacles = || self.taken.iter().chain(&self.leaders);
            while let Some(hit) = obstacles().find(|r| overlap(r, &bounds)) {
                bottom = hit[1] - 0.5;
                bounds = [left, bottom - height, right, bottom];
            }
            let leader = (foot - bottom > LOOSE).then_some([x, foot - 1.5, bottom + 0.5]);
            let mut cost = (foot - bottom) + 0.6 * (centre - x).abs();
            if let Some([x, from, to]) = leader {
                let line = [x - 0.5, to, x + 0.5, from];
                let crossed = self.taken.iter().filter(|r| overlap(r, &line)).count();
                cost += 1000.0 * crossed as f64 + 4.0;
            }
            let covered = keep_off
                .iter()
                .filter(|k| left - 1.0 < **k && **k < right + 1.0);
            cost += 200.0 * covered.count() as f64;
            if best.as_ref().is_none_or(|(least, _)| cost < *least) {
                best = Some((cost, Perch { bounds, leader }));
            }
        }
        let (_, perch) = best.expect("seventeen places were tried");
        let [l, t, r, b] = perch.bounds;
        self.taken.push([l - 1.0, t, r + 1.0, b]);
        if let Some([x, from, to]) = perch.leader {
            self.leaders.push([x - 1.0, to, x + 1.0, from]);
        }
        perch
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    fn segments_cross(a: [[f64; 2]; 2], b: [[f64; 2]; 2]) -> bool {
        // Both run between the same two rows.
        (a[0][0] - b[0][0]) * (a[1][0] - b[1][0]) < -1e-9
    }

    proptest! {
        #[test]
        fn seats_never_overlap_and_lines_never_cross(
            mut anchors in proptest::collection::vec(50.0..490.0f64, 1..24),
            width in 20.0..48.0f64,
        ) {
            anchors.sort_by(f64::total_cmp);
            let widths: Vec<f64> = (0..anchors.len()).map(|i| width + (i % 3) as f64 * 4.0).collect();
            let edges = [46.0, 498.0];
            let seats = seats(&anchors, &widths, edges).expect("they fit");
            for (i, a) in seats.iter().enumerate() {
                prop_assert_eq!(a.path.len(), a.row + 1);
                let x = a.path[a.row];
                prop_assert!(x - widths[i] / 2.0 >= edges[0] - 1e-9);
                prop_assert!(x + widths[i] / 2.0 <= edges[1] + 1e-9);
                for (j, b) in seats.iter().enumerate().skip(i + 1) {
                    let shared = a.path.len().min(b.path.len());
                    for row in 0..shared {
                        let room = |s: &Seat, k: usize| if s.row == row { widths[k] } else { SLOT };
                        let apart = b.path[row] - a.path[row];
                        prop_assert!(apart >= (room(a, i) + room(b, j)) / 2.0 - 1e-9);
                    }
                    for row in 1..shared {
                        let line = |s: &Seat| [[s.path[row - 1], 0.0], [s.path[row], 1.0]];
                        prop_assert!(!segments_cross(line(a), line(b)));
                    }
                }
            }
        }

        #[test]
        fn perches_never_overlap(
            places in proptest::collection::vec((60.0..480.0f64, 5.0..60.0f64, 0.0..150.0f64), 1..30),
        ) {
            let mut skyline = Skyline::new([46.0, 498.0], 200.0);
            for (x, _, height) in &places {
                skyline.trace(&[[x - 8.0, 200.0], [*x, 200.0 - height], [x + 8.0, 200.0]]);
            }
            let mut percher = Percher::new(&skyline, [46.0, 498.0]);
            let perches: Vec<Perch> = places.iter().map(|(x, w, _)| percher.perch(*x, [*w, 8.0], &[])).collect();
            for (i, a) in perches.iter().enumerate() {
                let [l, _, r, b] = a.bounds;
                prop_assert!(l >= 46.0 - 1e-9 && r <= 498.0 + 1e-9);
                prop_assert!(b <= skyline.top(l, r) - AIR + 1e-9);
                for other in &perches[i + 1..] {
                    prop_assert!(!overlap(&a.bounds, &other.bounds));
                }
            }
        }
    }

    #[test]
    fn a_label_with_room_stands_over_its_anchor() {
        let seats = seats(&[100.0, 300.0], &[40.0, 40.0], [46.0, 498.0]).unwrap();
        assert_eq!(
            seats.iter().map(|s| (s.row, s.path[0])).collect::<Vec<_>>(),
            [(0, 100.0), (0, 300.0)]
        );
        let skyline = Skyline::new([46.0, 498.0], 200.0);
        let perch = Percher::new(&skyline, [46.0, 498.0]).perch(100.0, [10.0, 8.0], &[]);
        assert_eq!(perch.bounds, [95.0, 189.5, 105.0, 197.5]);
        assert_eq!(perch.leader, None);
    }

    #[test]
    fn neighbours_part_by_equal_shares() {
        let x = spread(&[100.0, 100.0], &[20.0, 20.0], [0.0, 400.0]).unwrap();
        assert_eq!(x, [100.0 - 12.0, 100.0 + 12.0]);
        let edge = spread(&[1.0, 2.0], &[20.0, 20.0], [0.0, 400.0]).unwrap();
        assert_eq!(edge, [10.0, 34.0]);
        assert_eq!(spread(&[1.0, 2.0], &[20.0, 20.0], [0.0, 43.0]), None);
    }

    #[test]
    fn too_many_labels_are_refused() {
        let anchors: Vec<f64> = (0..200).map(f64::from).collect();
        assert_eq!(seats(&anchors, &[40.0; 200], [0.0, 440.0]), None);
    }
}
