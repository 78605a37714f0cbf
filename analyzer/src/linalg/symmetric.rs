//! Pivot order for large patterns: down the diagonal, by approximate minimum degree.
//!
//! The search of `markowitz` looks at values and takes long on patterns of thousands of unknowns that
//! fill in (meshes). Their order is taken from the pattern of A + A^T alone (P. R. Amestoy, T. A. Davis,
//! I. S. Duff, "An approximate minimum degree ordering algorithm", SIAM J. Matrix Anal. Appl. 17, 1996;
//! crate `amd`). Whether diagonal pivots are sound at the reference points is for the caller to see.

use crate::linalg::elimination::Step;
use crate::linalg::pattern::Pattern;
use crate::linalg::values::Values;
use num_complex::Complex64;

/// Steps along the diagonal; `None` when no order was found.
pub(crate) fn order(
    pattern: &Pattern,
    samples: &[&Values],
    references: &[Complex64],
) -> Option<Vec<Step>> {
    let n = pattern.n();
    let (mut starts, mut rows) = (vec![0i32], Vec::with_capacity(pattern.slots()));
    for (_, row, column) in pattern.entries() {
        starts.resize(column as usize + 1, rows.len() as i32);
        rows.push(row as i32);
    }
    starts.resize(n + 1, rows.len() as i32);
    let (order, _, _) = amd::order(n as i32, &starts, &rows, &amd::Control::default()).ok()?;
    let step = |k: &i32| Step {
        row: *k as u32,
        column: *k as u32,
        pivot: 0,
        lower: Vec::new(),
        upper: Vec::new(),
    };
    let late = delayed(pattern, samples, references, &order);
    (order.len() == n).then(|| late.iter().map(step).collect())
}

/// The order with every unknown whose diagonal entry is small in its column at some reference moved
/// behind the first of its neighbours: eliminating that one fills the diagonal in.
fn delayed(
    pattern: &Pattern,
    samples: &[&Values],
    references: &[Complex64],
    order: &[i32],
) -> Vec<i32> {
    const SMALL: f64 = 1e-3;
    const ROUNDS: i32 = 4;
    let n = pattern.n();
    let mut weak = vec![false; n];
    for values in samples {
        for s in references {
            let a = values.eval(*s);
            let mut largest = vec![0.0f64; n];
            for (slot, _, column) in pattern.entries() {
                largest[column as usize] = largest[column as usize].max(a[slot].norm());
            }
            for (k, weak) in weak.iter_mut().enumerate() {
                let own = pattern
                    .slot(k as u32, k as u32)
                    .map_or(0.0, |slot| a[slot].norm());
                *weak |= own < SMALL * largest[k];
            }
        }
    }
    let mut place = vec![0.0; n];
    for (at, k) in order.iter().enumerate() {
        place[*k as usize] = at as f64;
    }
    // A weak one may follow another weak one that has found its place, so a few rounds are needed.
    let mut placed: Vec<bool> = weak.iter().map(|weak| !weak).collect();
    for round in 1..=ROUNDS {
        let mut first = vec![f64::INFINITY; n];
        for (_, row, column) in pattern.entries() {
            let (i, j) = (row as usize, column as usize);
            if i != j && placed[i] {
                first[j] = first[j].min(place[i]);
            }
            if i != j && placed[j] {
                first[i] = first[i].min(place[j]);
            }
        }
        for k in 0..n {
            if !placed[k] && first[k].is_finite() {
                // Behind that neighbour, before the next one of the order.
                place[k] = f64::max(place[k], first[k] + 0.5f64.powi(round));
                placed[k] = true;
            }
        }
    }
    let mut late = order.to_vec();
    late.sort_by(|a, b| place[*a as usize].total_cmp(&place[*b as usize]));
    late
}

#[cfg(test)]
mod tests {
    use crate::linalg::pattern::Pattern;
    use crate::linalg::plan::Plan;
    use crate::linalg::values::Values;
    use num_complex::Complex64;

    /// A square mesh of conductances with a capacitance at every node and gain along one edge.
    fn mesh(side: u32, gain: f64) -> Values {
        let at = |i: u32, j: u32| i * side + j;
        let n = side * side;
        let mut edges = Vec::new();
        for i in 0..side {
            for j in 0..side {
                if i + 1 < side {
                    edges.push((at(i, j), at(i + 1, j)));
                }
                if j + 1 < side {
                    edges.push((at(i, j), at(i, j + 1)));
                }
            }
        }
        let entries: Vec<(u32, u32)> = edges.iter().flat_map(|&(a, b)| [(a, b), (b, a)]).collect();
        let mut values = Values::new(Pattern::new(n as usize, &entries));
        for &(a, b) in &edges {
            let y = 1.0 + f64::from((a * 7 + b * 3) % 11);
            for (row, column, v) in [(a, a, y), (b, b, y), (a, b, -y), (b, a, -y)] {
                values.add_g(row, column, v).expect("in the pattern");
            }
        }
        for k in 0..n {
            values
                .add_c(k, k, 0.1 + f64::from(k % 13))
                .expect("in the pattern");
            values.add_g(k, k, 1e-3).expect("in the pattern");
        }
        for j in 0..side - 1 {
            values
                .add_g(at(0, j + 1), at(0, j), gain)
                .expect("in the pattern");
        }
        values
    }

    #[test]
    fn the_diagonal_order_gives_what_the_search_gives() {
        let (on, off) = (mesh(28, 5.0), mesh(28, 0.0));
        let wanted: Vec<(u32, u32)> = (0..784).map(|k| (k, k)).collect();
        let plan = Plan::new(on.pattern.clone(), &[&on, &off], &[1e-2, 1.0, 1e2], &wanted)
            .expect("regular");
        let searched = Plan::for_point(&on, Complex64::new(0.0, 0.3), &wanted).expect("regular");
        assert!(
            plan.multiply_adds().0 < searched.multiply_adds().0,
            "{:?} {:?}",
            plan.multiply_adds(),
            searched.multiply_adds()
        );
        let (mut a, mut b) = (plan.workspace(), searched.workspace());
        let s = [Complex64::new(0.0, 0.3)];
        plan.factor_sound(&on, &s, &mut a).expect("sound");
        searched.factor_sound(&on, &s, &mut b).expect("sound");
        plan.invert_selected(&mut a).expect("factored");
        searched.invert_selected(&mut b).expect("factored");
        let gap = (a.det(0).ratio(&b.det(0)).to_complex() - 1.0).norm();
        assert!(gap < 1e-10, "determinants differ by {gap:e}");
        for k in [0, 1, 400, 783] {
            let (x, y) = (a.inverse(0, k, k), b.inverse(0, k, k));
            let (x, y) = (x.expect("wanted"), y.expect("wanted"));
            assert!((x - y).norm() < 1e-10 * y.norm(), "{k}: {x} {y}");
        }
        let gap = (a.log_derivative(0) - b.log_derivative(0)).norm();
        assert!(
            gap < 1e-10 * b.log_derivative(0).norm(),
            "derivatives differ by {gap:e}"
        );
    }
}
