//! Outlines of circles and of lines with a width.

use crate::figures::text::Spot;

/// Corners of the polygon that stands for a circle.
const CIRCLE_CORNERS: u32 = 48;

/// A circle as a polygon.
pub(super) fn circle(centre: Spot, radius: f64) -> Vec<Spot> {
    (0..CIRCLE_CORNERS)
        .map(|i| {
            let angle = f64::from(i) * std::f64::consts::TAU / f64::from(CIRCLE_CORNERS);
            (centre.0 + radius * libm::cos(angle), centre.1 + radius * libm::sin(angle))
        })
        .collect()
}

/// The outline of a line of width `2 * half`, whose neighbouring vertices differ: one quadrilateral a piece, meeting
/// without overlap where the line bends gently, with a wedge where it bends sharply. All run the same way round, so
/// their areas add up.
pub(super) fn thicken(spots: &[Spot], half: f64) -> Vec<Vec<Spot>> {
    let mut contours = Vec::new();
    let normals: Vec<Spot> = spots
        .windows(2)
        .map(|pair| {
            let (dx, dy) = (pair[1].0 - pair[0].0, pair[1].1 - pair[0].1);
            let length = (dx * dx + dy * dy).sqrt();
            (-dy / length * half, dx / length * half)
        })
        .collect();
    let closed = spots.len() > 2 && spots.first() == spots.last();
    // The offset at a vertex between two pieces: their common corner if they bend by less than 60 degrees.
    let corner = |a: Spot, b: Spot| {
        let dot = (a.0 * b.0 + a.1 * b.1) / (half * half);
        (dot > 0.5).then(|| ((a.0 + b.0) / (1.0 + dot), (a.1 + b.1) / (1.0 + dot)))
    };
    for (i, &normal) in normals.iter().enumerate() {
        let before = if i > 0 { Some(normals[i - 1]) } else { closed.then(|| normals[normals.len() - 1]) };
        let after = if i + 1 < normals.len() { Some(normals[i + 1]) } else { closed.then(|| normals[0]) };
        let start = before.and_then(|other| corner(other, normal)).unwrap_or(normal);
        let end = after.and_then(|other| corner(normal, other)).unwrap_or(normal);
        let (a, b) = (spots[i], spots[i + 1]);
        contours.push(vec![
            (a.0 + start.0, a.1 + start.1),
            (b.0 + end.0, b.1 + end.1),
            (b.0 - end.0, b.1 - end.1),
            (a.0 - start.0, a.1 - start.1),
        ]);
        if let Some(other) = after.filter(|&other| corner(normal, other).is_none()) {
            let turn = normal.0 * other.1 - normal.1 * other.0;
            let side = if turn > 0.0 { -1.0 } else { 1.0 };
            let (p, q) = ((b.0 + side * normal.0, b.1 + side * normal.1), (b.0 + side * other.0, b.1 + side * other.1));
            contours.push(if side > 0.0 { vec![b, p, q] } else { vec![b, q, p] });
        }
    }
    contours
}
