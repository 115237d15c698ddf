//! Numeric complex nodal solve of the same netlist: the second route, which shares no algebra with the symbolic one.

use num_complex::Complex64;

use super::netlist::{Circuit, Output};
use crate::units::Kind;

/// V(output)/V(source) at the angular frequency `w` (rad/s) with ideal op-amps, slot values in ohms and farads.
///
/// Modified nodal analysis: unknowns are all node voltages but ground and source, and the current of each op-amp
/// output; equations are the current law at each node and V(plus) = V(minus) at each op-amp. `None` if singular.
pub fn response(circuit: &Circuit, output: &Output, values: &[f64], w: f64) -> Option<Complex64> {
    let zero = Complex64::new(0.0, 0.0);
    let voltages = circuit.nodes.len() - 2;
    let size = voltages + circuit.op_amps.len();
    // The last column is the right-hand side, for a source of 1 V.
    let mut matrix = vec![vec![zero; size + 1]; size];
    let unknown = |node: usize| node.checked_sub(2);
    for (slot, part) in circuit.slots.iter().enumerate() {
        if output.without.contains(&slot) {
            continue;
        }
        let admittance = match part.kind {
            Kind::Resistor => Complex64::new(1.0 / values[slot], 0.0),
            Kind::Capacitor => Complex64::new(0.0, w * values[slot]),
        };
        let [a, b] = part.nodes;
        for (here, there) in [(a, b), (b, a)] {
            let Some(row) = unknown(here) else { continue };
            matrix[row][row] += admittance;
            match unknown(there) {
                Some(column) => matrix[row][column] -= admittance,
                None if there == 1 => matrix[row][size] += admittance,
                None => {}
            }
        }
    }
    for (k, op_amp) in circuit.op_amps.iter().enumerate() {
        let line = voltages + k;
        if let Some(row) = unknown(op_amp.out) {
            matrix[row][line] = Complex64::new(1.0, 0.0);
        }
        for (node, sign) in [(op_amp.plus, 1.0), (op_amp.minus, -1.0)] {
            match unknown(node) {
                Some(column) => matrix[line][column] += sign,
                None if node == 1 => matrix[line][size] -= sign,
                None => {}
            }
        }
    }
    let solution = solve(matrix)?;
    match unknown(output.node) {
        Some(place) => Some(solution[place]),
        None => Some(Complex64::new(1.0, 0.0)).filter(|_| output.node == 1),
    }
}

/// Gaussian elimination with scaled partial pivoting; the last column is the right-hand side.
pub(crate) fn solve(mut matrix: Vec<Vec<Complex64>>) -> Option<Vec<Complex64>> {
    let n = matrix.len();
    for row in &mut matrix {
        let scale = row[..n].iter().map(|z| z.norm()).fold(0.0, f64::max);
        if scale <= 0.0 {
            return None;
        }
        row.iter_mut().for_each(|z| *z /= scale);
    }
    for column in 0..n {
        let pivot = (column..n).max_by(|&a, &b| matrix[a][column].norm().total_cmp(&matrix[b][column].norm()))?;
        let lead = matrix[pivot][column].norm();
        if lead <= 0.0 || !lead.is_finite() {
            return None;
        }
        matrix.swap(column, pivot);
        let (done, rest) = matrix.split_at_mut(column + 1);
        let lead = &done[column];
        for row in rest {
            let factor = row[column] / lead[column];
            for k in column..=n {
                let step = factor * lead[k];
                row[k] -= step;
            }
        }
    }
    let mut x = vec![Complex64::new(0.0, 0.0); n];
    for row in (0..n).rev() {
        let known: Complex64 = (row + 1..n).map(|k| matrix[row][k] * x[k]).sum();
        x[row] = (matrix[row][n] - known) / matrix[row][row];
    }
    Some(x)
}
