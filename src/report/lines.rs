//! Lines on a page: fewer points, dashes.

/// A place on the page, points from the top left corner.
type Place = [f64; 2];

/// The same line with fewer points: nothing moves by more than a twentieth of a point
/// (D. H. Douglas and T. K. Peucker, Cartographica 10, 112, 1973).
pub fn simplify(points: &[Place]) -> Vec<Place> {
    const TOLERANCE: f64 = 0.05;
    if points.len() < 3 {
        return points.to_vec();
    }
    let mut keep = vec![false; points.len()];
    keep[0] = true;
    keep[points.len() - 1] = true;
    let mut open = vec![(0, points.len() - 1)];
    while let Some((first, last)) = open.pop() {
        let (a, b) = (points[first], points[last]);
        let chord = [b[0] - a[0], b[1] - a[1]];
        let length = chord[0].hypot(chord[1]);
        let mut farthest = (0.0, first);
        for i in first + 1..last {
            let from = [points[i][0] - a[0], points[i][1] - a[1]];
            let distance = match length > 0.0 {
                true => (chord[0] * from[1] - chord[1] * from[0]).abs() / length,
                false => from[0].hypot(from[1]),
            };
            if distance > farthest.0 {
                farthest = (distance, i);
            }
        }
        if farthest.0 > TOLERANCE {
            keep[farthest.1] = true;
            open.push((first, farthest.1));
            open.push((farthest.1, last));
        }
    }
    let kept = points.iter().zip(&keep).filter(|(_, k)| **k);
    kept.map(|(p, _)| *p).collect()
}

/// The drawn pieces of a dashed line: `dash` points drawn, `gap` points left out.
pub fn dashes(points: &[Place], dash: f64, gap: f64) -> Vec<Vec<Place>> {
    let mut pieces = Vec::new();
    let mut piece: Vec<Place> = points.first().copied().into_iter().collect();
    let (mut drawing, mut left) = (true, dash);
    for pair in points.windows(2) {
        let (mut a, b) = (pair[0], pair[1]);
        let mut length = (b[0] - a[0]).hypot(b[1] - a[1]);
        while length > left {
            let t = left / length;
            a = [a[0] + t * (b[0] - a[0]), a[1] + t * (b[1] - a[1])];
            length -= left;
            if drawing {
                piece.push(a);
                pieces.push(std::mem::take(&mut piece));
            } else {
                piece.push(a);
            }
            drawing = !drawing;
            left = if drawing { dash } else { gap };
        }
        left -= length;
        if drawing {
            piece.push(b);
        }
    }
    if drawing && piece.len() > 1 {
        pieces.push(piece);
    }
    pieces
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn dashes_have_their_lengths() {
        let line = [[0.0, 0.0], [4.0, 0.0], [10.0, 0.0]];
        let pieces = dashes(&line, 3.0, 2.0);
        let ends: Vec<_> = pieces
            .iter()
            .map(|p| (p[0][0], p[p.len() - 1][0]))
            .collect();
        assert_eq!(ends, [(0.0, 3.0), (5.0, 8.0)]);
    }

    #[test]
    fn a_simplified_line_keeps_its_shape() {
        let curve: Vec<[f64; 2]> = (0..2000)
            .map(|i| {
                let x = f64::from(i) * 0.2;
                [x, 100.0 * (-(x - 200.0).powi(2) / 800.0).exp()]
            })
            .collect();
        let fewer = simplify(&curve);
        assert!(fewer.len() < 120, "{} points are left", fewer.len());
        for p in &curve {
            let at = fewer.partition_point(|q| q[0] < p[0]).max(1);
            let (a, b) = (fewer[at - 1], fewer[at]);
            let y = a[1] + (b[1] - a[1]) * (p[0] - a[0]) / (b[0] - a[0]);
            assert!((y - p[1]).abs() < 0.6, "moved by {} at {}", y - p[1], p[0]);
        }
    }
}
