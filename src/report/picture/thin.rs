//! Curves made small: what a column of pixels cannot show is left out, what leaves the panel is cut.

use super::canvas::Place;

/// Unbroken runs of `points`; a `None` is a gap.
pub(crate) fn runs(points: impl Iterator<Item = Option<Place>>) -> Vec<Vec<Place>> {
    let mut runs = vec![Vec::new()];
    for point in points {
        match (point, runs.last_mut()) {
            (Some(point), Some(run)) => run.push(point),
            (None, Some(run)) if !run.is_empty() => runs.push(Vec::new()),
            _ => {}
        }
    }
    runs.retain(|run| !run.is_empty());
    runs
}

/// Keeps the first, lowest, highest and last point of each stretch of points that share a column
/// `column` pixels wide. The order stays, so that the curve looks the same at that resolution.
pub(crate) fn thin(points: &[Place], column: f64) -> Vec<Place> {
    let index_of = |point: &Place| (point.0 / column).floor();
    let mut kept: Vec<Place> = Vec::new();
    for group in points.chunk_by(|a, b| index_of(a) == index_of(b)) {
        if group.len() <= 2 {
            kept.extend_from_slice(group);
            continue;
        }
        let by_height = |a: &(usize, &Place), b: &(usize, &Place)| a.1.1.total_cmp(&b.1.1);
        let mut chosen = vec![0, group.len() - 1];
        chosen.extend(group.iter().enumerate().min_by(by_height).map(|(at, _)| at));
        chosen.extend(group.iter().enumerate().max_by(by_height).map(|(at, _)| at));
        chosen.sort_unstable();
        chosen.dedup();
        kept.extend(chosen.into_iter().map(|at| group[at]));
    }
    kept
}

/// Drops points that lie on the straight line between their neighbours, to `tolerance` pixels.
pub(crate) fn straighten(points: &[Place], tolerance: f64) -> Vec<Place> {
    let mut kept: Vec<Place> = Vec::with_capacity(points.len());
    let mut skipped: Vec<Place> = Vec::new();
    for (index, &point) in points.iter().enumerate() {
        if let (Some(&from), Some(&next)) = (kept.last(), points.get(index + 1)) {
            skipped.push(point);
            if skipped.len() < 64
                && skipped
                    .iter()
                    .all(|&middle| distance(middle, from, next) <= tolerance)
            {
                continue;
            }
        }
        kept.push(point);
        skipped.clear();
    }
    kept
}

/// Distance of `point` from the stretch `from`..`to`.
fn distance(point: Place, from: Place, to: Place) -> f64 {
    let (dx, dy) = (to.0 - from.0, to.1 - from.1);
    let square = dx * dx + dy * dy;
    let (px, py) = (point.0 - from.0, point.1 - from.1);
    if square == 0.0 {
        return px.hypot(py);
    }
    let share = ((px * dx + py * dy) / square).clamp(0.0, 1.0);
    (px - share * dx).hypot(py - share * dy)
}

/// The parts of a line inside the rectangle from `low` to `high` (Liang and Barsky, ACM Trans. Graph.,
/// January 1984, per stretch).
pub(crate) fn clip(points: &[Place], low: Place, high: Place) -> Vec<Vec<Place>> {
    let mut parts: Vec<Vec<Place>> = Vec::new();
    let mut joins = false;
    for pair in points.windows(2) {
        let Some((from, to)) = clip_stretch(pair[0], pair[1], low, high) else {
            joins = false;
            continue;
        };
        match parts.last_mut() {
            Some(part) if joins => part.push(to),
            _ => parts.push(vec![from, to]),
        }
        joins = to == pair[1];
    }
    parts
}

fn clip_stretch(from: Place, to: Place, low: Place, high: Place) -> Option<(Place, Place)> {
    let (dx, dy) = (to.0 - from.0, to.1 - from.1);
    let (mut enter, mut leave) = (0.0f64, 1.0f64);
    for (direction, room) in [
        (-dx, from.0 - low.0),
        (dx, high.0 - from.0),
        (-dy, from.1 - low.1),
        (dy, high.1 - from.1),
    ] {
        if direction == 0.0 {
            if room < 0.0 {
                return None;
            }
        } else if direction < 0.0 {
            enter = enter.max(room / direction);
        } else {
            leave = leave.min(room / direction);
        }
    }
    if enter > leave {
        return None;
    }
    let at = |share: f64| (from.0 + dx * share, from.1 + dy * share);
    Some((
        if enter > 0.0 { at(enter) } else { from },
        if leave < 1.0 { at(leave) } else { to },
    ))
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    #[test]
    fn a_line_across_a_corner_is_cut_at_the_edges() {
        let parts = clip(
            &[(-1.0, 1.0), (1.0, 3.0), (3.0, 1.0)],
            (0.0, 0.0),
            (2.0, 2.5),
        );
        assert_eq!(
            parts,
            [vec![(0.0, 2.0), (0.5, 2.5)], vec![(1.5, 2.5), (2.0, 2.0)]]
        );
        assert!(clip(&[(-1.0, 9.0), (3.0, 9.0)], (0.0, 0.0), (2.0, 2.0)).is_empty());
    }

    #[test]
    fn gaps_split_runs() {
        let points = [
            None,
            Some((0.0, 0.0)),
            None,
            None,
            Some((1.0, 1.0)),
            Some((2.0, 0.0)),
        ];
        let runs = runs(points.into_iter());
        assert_eq!(runs, [vec![(0.0, 0.0)], vec![(1.0, 1.0), (2.0, 0.0)]]);
    }

    #[test]
    fn a_straight_line_needs_two_points() {
        let line: Vec<Place> = (0..50)
            .map(|x| (f64::from(x), 2.0 * f64::from(x)))
            .collect();
        assert_eq!(straighten(&line, 0.05), [(0.0, 0.0), (49.0, 98.0)]);
    }

    proptest! {
        #[test]
        fn extremes_of_every_column_survive_thinning(
            heights in prop::collection::vec(-100.0..100.0f64, 1..400),
        ) {
            let points: Vec<Place> = heights
                .iter()
                .enumerate()
                .map(|(index, height)| (index as f64 * 0.05, *height))
                .collect();
            let kept = thin(&points, 1.0);
            prop_assert!(kept.len() <= 4 * (points.len() / 20 + 1));
            let fold = |set: &[Place], column: usize, pick: fn(f64, f64) -> f64, start: f64| {
                set.iter()
                    .filter(|point| point.0.floor() as usize == column)
                    .map(|point| point.1)
                    .fold(start, pick)
            };
            for column in 0..=points.len() / 20 {
                for (pick, start) in [
                    (f64::min as fn(f64, f64) -> f64, f64::INFINITY),
                    (f64::max, f64::NEG_INFINITY),
                ] {
                    prop_assert_eq!(
                        fold(&points, column, pick, start),
                        fold(&kept, column, pick, start)
                    );
                }
            }
        }
    }
}
