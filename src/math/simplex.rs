//! Downhill simplex search for the lowest value of a function of a few unknowns, without slopes.
//!
//! J. A. Nelder, R. Mead, "A simplex method for function minimization", The Computer Journal 7 (1965), with
//! their coefficients 1, 2, 1/2, 1/2.

/// The lowest point found from `start`, with the simplex `size` wide at first; ends when the simplex is narrower
/// than `narrow` or after `evaluations`. Values that are not numbers count as infinite.
pub fn lowest(
    start: &[f64],
    size: f64,
    narrow: f64,
    evaluations: usize,
    mut function: impl FnMut(&[f64]) -> f64,
) -> Vec<f64> {
    let mut left = evaluations;
    let mut value = |point: &[f64]| {
        left = left.saturating_sub(1);
        let value = function(point);
        (if value.is_nan() { f64::INFINITY } else { value }, left)
    };
    let mut corners: Vec<(f64, Vec<f64>)> = Vec::with_capacity(start.len() + 1);
    for corner in 0..=start.len() {
        let mut point = start.to_vec();
        if corner > 0 {
            point[corner - 1] += size;
        }
        corners.push((value(&point).0, point));
    }
    loop {
        corners.sort_by(|a, b| a.0.total_cmp(&b.0));
        let last = corners.len() - 1;
        let width = corners[1..]
            .iter()
            .flat_map(|(_, point)| point.iter().zip(&corners[0].1).map(|(a, b)| (a - b).abs()))
            .fold(0.0, f64::max);
        if width < narrow {
            return corners.swap_remove(0).1;
        }
        let middle: Vec<f64> = (0..start.len())
            .map(|axis| corners[..last].iter().map(|(_, p)| p[axis]).sum::<f64>() / last as f64)
            .collect();
        let along = |factor: f64| -> Vec<f64> {
            middle
                .iter()
                .zip(&corners[last].1)
                .map(|(m, w)| m + factor * (m - w))
                .collect()
        };
        let reflected = along(1.0);
        let (at_reflected, mut remaining) = value(&reflected);
        let replacement = if at_reflected < corners[0].0 {
            let expanded = along(2.0);
            let (at_expanded, rest) = value(&expanded);
            remaining = rest;
            Some(if at_expanded < at_reflected {
                (at_expanded, expanded)
            } else {
                (at_reflected, reflected)
            })
        } else if at_reflected < corners[last - 1].0 {
            Some((at_reflected, reflected))
        } else {
            let contracted = along(if at_reflected < corners[last].0 {
                0.5
            } else {
                -0.5
            });
            let (at_contracted, rest) = value(&contracted);
            remaining = rest;
            (at_contracted < corners[last].0.min(at_reflected))
                .then_some((at_contracted, contracted))
        };
        match replacement {
            Some(better) => corners[last] = better,
            None => {
                let best = corners[0].1.clone();
                for corner in &mut corners[1..] {
                    for (x, b) in corner.1.iter_mut().zip(&best) {
                        *x = 0.5 * (*x + b);
                    }
                    let (at, rest) = value(&corner.1);
                    corner.0 = at;
                    remaining = rest;
                }
            }
        }
        if remaining == 0 {
            corners.sort_by(|a, b| a.0.total_cmp(&b.0));
            return corners.swap_remove(0).1;
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn finds_the_valley_of_rosenbrock() {
        // H. H. Rosenbrock, The Computer Journal 3 (1960): lowest at (1, 1).
        let banana = |x: &[f64]| 100.0 * (x[1] - x[0] * x[0]).powi(2) + (1.0 - x[0]).powi(2);
        let at = lowest(&[-1.2, 1.0], 0.5, 1e-9, 2000, banana);
        assert!(
            (at[0] - 1.0).abs() < 1e-6 && (at[1] - 1.0).abs() < 1e-6,
            "{at:?}"
        );
    }

    #[test]
    fn ends_where_nothing_is_a_number() {
        assert_eq!(lowest(&[0.0, 0.0], 1.0, 1e-9, 100, |_| f64::NAN).len(), 2);
    }
}
