//! Labels at marked points: each takes the place where it hides least.

use super::canvas::Place;

/// A rectangle in pixels.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(crate) struct Frame {
    pub(crate) left: f64,
    pub(crate) top: f64,
    pub(crate) right: f64,
    pub(crate) bottom: f64,
}

impl Frame {
    pub(crate) fn width(&self) -> f64 {
        self.right - self.left
    }

    pub(crate) fn height(&self) -> f64 {
        self.bottom - self.top
    }

    pub(crate) fn holds(&self, at: Place) -> bool {
        at.0 >= self.left && at.0 <= self.right && at.1 >= self.top && at.1 <= self.bottom
    }

    /// Whether the two share ground.
    pub(crate) fn meets(&self, other: &Self) -> bool {
        self.left < other.right
            && other.left < self.right
            && self.top < other.bottom
            && other.top < self.bottom
    }

    /// Moved as little as needed to lie in `room`.
    fn moved_into(mut self, room: &Self) -> Self {
        let dx = (room.left - self.left).max(0.0) - (self.right - room.right).max(0.0);
        let dy = (room.top - self.top).max(0.0) - (self.bottom - room.bottom).max(0.0);
        self.left += dx;
        self.right += dx;
        self.top += dy;
        self.bottom += dy;
        self
    }
}

/// The best place in `room` for a label of `size` that belongs to `at`: clear of `placed`, over as few
/// of `drawn` as possible, and near. `None` where every place meets another label.
pub(crate) fn place(
    at: Place,
    size: Place,
    room: &Frame,
    drawn: &[Place],
    placed: &[Frame],
) -> Option<Frame> {
    let (width, height) = size;
    let mut best: Option<(f64, Frame)> = None;
    for row in -12..=12 {
        for column in [-1.5, -1.0, -0.7, -0.35, 0.0, 0.35, 0.7, 1.0, 1.5] {
            let centre = (
                at.0 + column * (width / 2.0 + 14.0),
                at.1 + f64::from(row) * 12.0,
            );
            let frame = Frame {
                left: centre.0 - width / 2.0,
                top: centre.1 - height / 2.0,
                right: centre.0 + width / 2.0,
                bottom: centre.1 + height / 2.0,
            }
            .moved_into(room);
            let own = Frame {
                left: at.0 - 6.0,
                top: at.1 - 6.0,
                right: at.0 + 6.0,
                bottom: at.1 + 6.0,
            };
            if frame.meets(&own) || placed.iter().any(|other| frame.meets(other)) {
                continue;
            }
            let hidden = drawn.iter().filter(|point| frame.holds(**point)).count();
            let far = (centre.0 - at.0).hypot(centre.1 - at.1);
            let cost = hidden as f64 * 4.0 + far * 0.15;
            if best.is_none_or(|(least, _)| cost < least) {
                best = Some((cost, frame));
            }
        }
    }
    best.map(|(_, frame)| frame)
}

#[cfg(test)]
mod tests {
    use super::*;

    const ROOM: Frame = Frame {
        left: 0.0,
        top: 0.0,
        right: 300.0,
        bottom: 200.0,
    };

    #[test]
    fn a_label_stays_inside_and_clear() {
        let size = (120.0, 16.0);
        let mut placed: Vec<Frame> = Vec::new();
        for at in [(0.0, 0.0), (300.0, 200.0), (150.0, 100.0), (150.0, 100.0)] {
            let frame = place(at, size, &ROOM, &[], &placed).expect("there is room");
            assert!(frame.left >= 0.0 && frame.right <= 300.0);
            assert!(frame.top >= 0.0 && frame.bottom <= 200.0);
            assert!(placed.iter().all(|other| !frame.meets(other)));
            placed.push(frame);
        }
    }

    #[test]
    fn a_label_goes_where_no_curve_is() {
        let curve: Vec<Place> = (0..300).map(|x| (f64::from(x), 80.0)).collect();
        let frame = place((150.0, 100.0), (100.0, 16.0), &ROOM, &curve, &[]).unwrap();
        assert!(curve.iter().all(|point| !frame.holds(*point)), "{frame:?}");
    }

    #[test]
    fn no_room_is_said() {
        assert_eq!(place((5.0, 5.0), (120.0, 16.0), &ROOM, &[], &[ROOM]), None);
    }
}
