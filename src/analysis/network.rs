//! A board's netlist with op-amps of finite bandwidth and what surrounds them: poles and responses, numerically.

use std::f64::consts::TAU;

use num_complex::Complex64;

use super::built::BuiltSection;
use crate::units::Kind;

/// What surrounds the parts of a board.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Surroundings {
    /// Gain-bandwidth product of every op-amp, Hz: its gain is GBW/(j f); `None` for ideal op-amps.
    pub bandwidth: Option<f64>,
    /// Output resistance of every op-amp, Ω.
    pub output_resistance: f64,
    /// Resistance of the source, Ω.
    pub source_resistance: f64,
    /// Resistance from the output of the board to ground, Ω; `None` for none.
    pub load_resistance: Option<f64>,
    /// Stray capacitance from every node to ground, F.
    pub stray: f64,
}

impl Surroundings {
    /// Ideal op-amps, an ideal source, no load and no strays.
    pub const IDEAL: Surroundings = Surroundings {
        bandwidth: None,
        output_resistance: 0.0,
        source_resistance: 0.0,
        load_resistance: None,
        stray: 0.0,
    };

    /// Part of the way from ideal ones to these: `share` 0 is ideal, 1 is these.
    pub fn in_part(&self, share: f64) -> Surroundings {
        Surroundings {
            bandwidth: self.bandwidth.map(|bandwidth| bandwidth / share),
            output_resistance: self.output_resistance * share,
            source_resistance: self.source_resistance * share,
            load_resistance: self.load_resistance.map(|load| load / share),
            stray: self.stray * share,
        }
    }
}

type Matrix = Vec<Vec<Complex64>>;

const ZERO: Complex64 = Complex64::new(0.0, 0.0);

/// The equations of a chain of sections: (A + s B) x = e, e a source of 1 V.
///
/// Modified nodal analysis. Unknowns are the node voltages, the current out of each op-amp, and the current of the source;
/// equations are the current law at each node, each op-amp, and the voltage of the source.
#[derive(Clone, Debug)]
pub struct Network {
    constant: Vec<Vec<f64>>,
    slope: Vec<Vec<f64>>,
    source: usize,
    /// The unknown of the output's voltage.
    output: usize,
    /// The unknown of the voltage at each op-amp's output, section after section.
    op_amps: Vec<usize>,
    /// The equation of each op-amp.
    lines: Vec<usize>,
    /// The unknown of each section's input, and the first of its inner nodes.
    places: Vec<(usize, usize)>,
}

/// How the output follows sources within a network at one frequency.
#[derive(Clone, Debug)]
pub struct Reach {
    by_equation: Vec<Complex64>,
    lines: Vec<usize>,
}

impl Reach {
    /// |V(output)/I|² of a current into `a` and out of `b`, in Ω²; `None` is ground.
    pub fn from_current(&self, a: Option<usize>, b: Option<usize>) -> f64 {
        let at = |node: Option<usize>| node.map_or(ZERO, |node| self.by_equation[node]);
        (at(a) - at(b)).norm_sqr()
    }

    /// |V(output)/V|² of a voltage in series with an input of the op-amp of that number, section after section.
    pub fn from_input(&self, op_amp: usize) -> f64 {
        self.by_equation[self.lines[op_amp]].norm_sqr()
    }
}

impl Network {
    /// The chain of these sections: each drives the next.
    pub fn new(sections: &[&BuiltSection], around: &Surroundings) -> Network {
        // Nodes without ground; the source's own terminal comes first.
        let inner = |section: &BuiltSection| section.circuit.nodes.len() - 2;
        let nodes = 2 + sections.iter().map(|section| inner(section)).sum::<usize>();
        let amplifiers: usize = sections.iter().map(|section| section.circuit.op_amps.len()).sum();
        let size = nodes + amplifiers + 1;
        let mut network = Network {
            constant: vec![vec![0.0; size]; size],
            slope: vec![vec![0.0; size]; size],
            source: size - 1,
            output: 1,
            op_amps: Vec::new(),
            lines: Vec::new(),
            places: Vec::new(),
        };
        // The source: its terminal is node 0, the board's input node 1.
        network.constant[0][size - 1] = 1.0;
        network.constant[size - 1][0] = 1.0;
        if around.source_resistance > 0.0 {
            network.join(false, Some(0), Some(1), 1.0 / around.source_resistance);
        } else {
            // Without a resistance the source sits at the input itself, and node 0 follows it without a current.
            network.constant[0][size - 1] = 0.0;
            network.constant[1][size - 1] = 1.0;
            network.constant[0][0] = 1.0;
            network.constant[0][1] = -1.0;
        }
        let (mut first, mut amplifier) = (2, nodes);
        for section in sections {
            let input = network.output;
            network.places.push((input, first));
            let place = |node: usize| match node {
                0 => None,
                1 => Some(input),
                other => Some(first + other - 2),
            };
            for part in &section.parts {
                let [a, b] = section.circuit.slots[part.slot].nodes.map(place);
                let value = part.value.to_f64();
                match part.kind {
                    Kind::Resistor => network.join(false, a, b, 1.0 / value),
                    Kind::Capacitor => network.join(true, a, b, value),
                }
            }
            for node in first..first + inner(section) {
                network.join(true, Some(node), None, around.stray);
            }
            for op_amp in &section.circuit.op_amps {
                let line = amplifier;
                network.lines.push(line);
                let inverse = around.bandwidth.map_or(0.0, |bandwidth| 1.0 / (TAU * bandwidth));
                if let Some(out) = place(op_amp.out) {
                    // The current flows out of the op-amp into the node: it stands with a minus in the current law.
                    network.constant[out][line] -= 1.0;
                    network.slope[line][out] += inverse;
                    network.slope[line][line] += inverse * around.output_resistance;
                    network.op_amps.push(out);
                }
                for (node, sign) in [(op_amp.plus, -1.0), (op_amp.minus, 1.0)] {
                    if let Some(node) = place(node) {
                        network.constant[line][node] += sign;
                    }
                }
                amplifier += 1;
            }
            network.output = place(section.output().node).unwrap_or(input);
            first += inner(section);
        }
        if let Some(load) = around.load_resistance {
            network.join(false, Some(network.output), None, 1.0 / load);
        }
        network
    }

    /// The unknown of a node of a section, by its index in the circuit; `None` for ground.
    pub fn place(&self, section: usize, node: usize) -> Option<usize> {
        let (input, first) = self.places[section];
        match node {
            0 => None,
            1 => Some(input),
            other => Some(first + other - 2),
        }
    }

    /// The unknown of the output of the whole.
    pub fn output_place(&self) -> Option<usize> {
        Some(self.output)
    }

    /// How the output follows sources anywhere in the network at `w` rad/s: one solve of the transposed equations.
    pub fn reach(&self, w: f64) -> Option<Reach> {
        let matrix = self.at(Complex64::new(0.0, w));
        let size = matrix.len();
        let transposed = (0..size).map(|row| (0..size).map(|column| matrix[column][row]).collect()).collect();
        let mut right = vec![ZERO; size];
        right[self.output] = Complex64::new(1.0, 0.0);
        Some(Reach { by_equation: Factors::of(transposed)?.solve(right), lines: self.lines.clone() })
    }

    /// Joins two nodes by an admittance; `None` is ground.
    fn join(&mut self, capacitor: bool, a: Option<usize>, b: Option<usize>, admittance: f64) {
        let matrix = if capacitor { &mut self.slope } else { &mut self.constant };
        for (here, there) in [(a, b), (b, a)] {
            let Some(here) = here else { continue };
            matrix[here][here] += admittance;
            if let Some(there) = there {
                matrix[here][there] -= admittance;
            }
        }
    }

    fn at(&self, s: Complex64) -> Matrix {
        let entry = |(a, b): (&f64, &f64)| a + s * b;
        let row = |(a, b): (&Vec<f64>, &Vec<f64>)| a.iter().zip(b).map(entry).collect();
        self.constant.iter().zip(&self.slope).map(row).collect()
    }

    /// All unknowns at a complex frequency, for a source of 1 V; `None` if they are not determined.
    fn solved(&self, s: Complex64) -> Option<Vec<Complex64>> {
        let factors = Factors::of(self.at(s))?;
        let mut right = vec![ZERO; self.constant.len()];
        right[self.source] = Complex64::new(1.0, 0.0);
        Some(factors.solve(right))
    }

    /// The response from the source to the output, and the voltage at each op-amp's output, at `w` rad/s.
    pub fn response(&self, w: f64) -> Option<(Complex64, Vec<Complex64>)> {
        let solution = self.solved(Complex64::new(0.0, w))?;
        Some((solution[self.output], self.op_amps.iter().map(|&place| solution[place]).collect()))
    }

    /// The zero of the response from source to output next to a complex frequency, by the secant method; `None` where it is
    /// lost.
    pub fn zero_near(&self, start: Complex64) -> Option<Complex64> {
        let value = |s: Complex64| Some(self.solved(s)?[self.output]);
        let (mut before, mut here) = (start * (1.0 + 1e-4), start);
        let (mut of_before, mut of_here) = (value(before)?, value(here)?);
        for _ in 0..60 {
            if of_here.norm() <= 0.0 {
                return Some(here);
            }
            let step = of_here * (here - before) / (of_here - of_before);
            if !step.is_finite() {
                return None;
            }
            (before, of_before) = (here, of_here);
            here -= step;
            if step.norm() < 1e-12 * here.norm() {
                return Some(here);
            }
            of_here = value(here)?;
        }
        None
    }

    /// d ln det / ds at a complex frequency.
    fn logarithmic_slope(&self, s: Complex64) -> Option<Complex64> {
        let factors = Factors::of(self.at(s))?;
        let size = self.slope.len();
        let mut trace = ZERO;
        for column in (0..size).filter(|&column| self.slope.iter().any(|row| row[column].abs() > 0.0)) {
            let right = self.slope.iter().map(|row| Complex64::from(row[column])).collect();
            trace += factors.solve(right)[column];
        }
        Some(trace)
    }

    /// How many poles there are: the determinant grows with that power far above all of them.
    fn degree(&self, scale: f64) -> Option<usize> {
        let power = |s: f64| Some((Complex64::from(s) * self.logarithmic_slope(Complex64::from(s))?).re);
        let mut far = scale * 1e4;
        for _ in 0..8 {
            let (here, further) = (power(far)?, power(far * 10.0)?);
            if (here - here.round()).abs() < 1e-3 && (here - further).abs() < 1e-3 && here > 0.5 {
                return Some(here.round() as usize);
            }
            far *= 10.0;
        }
        None
    }

    /// All poles, rad/s; `scale` is about where they begin. `None` where they cannot be found.
    ///
    /// Simultaneous Newton steps on the determinant that repel each other (O. Aberth, Mathematics of Computation 27, 1973).
    pub fn poles(&self, scale: f64) -> Option<Vec<Complex64>> {
        let degree = self.degree(scale)?;
        // Started on a spiral outwards, off the real axis: half of them at the section's own frequency, the others beyond.
        let start = |k: usize| {
            let radius = scale * 10f64.powf(k as f64 / 2.0);
            Complex64::from_polar(radius, 1.9 + 2.4 * k as f64)
        };
        let mut poles: Vec<Complex64> = (0..degree).map(start).collect();
        const ROUNDS: usize = 400;
        for _ in 0..ROUNDS {
            let mut largest = 0.0f64;
            for k in 0..degree {
                let step = self.step(&poles, k);
                poles[k] -= step;
                largest = largest.max(step.norm() / poles[k].norm());
            }
            if largest < 1e-11 {
                return Some(poles);
            }
        }
        None
    }

    /// One such step; the other poles are kept away from.
    fn step(&self, poles: &[Complex64], k: usize) -> Complex64 {
        // On a pole the matrix is singular: there is nowhere to go from there.
        let Some(slope) = self.logarithmic_slope(poles[k]).filter(|slope| slope.is_finite()) else { return ZERO };
        let others = poles.iter().enumerate().filter(|(other, _)| *other != k);
        let repelled: Complex64 = others.map(|(_, pole)| 1.0 / (poles[k] - pole)).filter(|x| x.is_finite()).sum();
        let step = 1.0 / (slope - repelled);
        if step.is_finite() { step } else { ZERO }
    }

    /// Follows poles from where they were to where they are now; `None` where they get lost.
    pub fn follow(&self, poles: &[Complex64]) -> Option<Vec<Complex64>> {
        let mut poles = poles.to_vec();
        for _ in 0..60 {
            let mut largest = 0.0f64;
            for k in 0..poles.len() {
                let step = self.step(&poles, k);
                poles[k] -= step;
                largest = largest.max(step.norm() / poles[k].norm());
            }
            if largest < 1e-11 {
                return Some(poles);
            }
        }
        None
    }
}

/// A matrix taken apart by Gaussian elimination with scaled partial pivoting.
struct Factors {
    matrix: Matrix,
    order: Vec<usize>,
    scales: Vec<f64>,
}

impl Factors {
    fn of(mut matrix: Matrix) -> Option<Factors> {
        let size = matrix.len();
        let mut scales = Vec::new();
        for row in &mut matrix {
            let scale = row.iter().map(|z| z.norm()).fold(0.0, f64::max);
            if scale <= 0.0 || !scale.is_finite() {
                return None;
            }
            row.iter_mut().for_each(|z| *z /= scale);
            scales.push(scale);
        }
        let mut order: Vec<usize> = (0..size).collect();
        for column in 0..size {
            let pivot =
                (column..size).max_by(|&a, &b| matrix[a][column].norm().total_cmp(&matrix[b][column].norm()))?;
            if matrix[pivot][column].norm() <= 0.0 {
                return None;
            }
            matrix.swap(column, pivot);
            order.swap(column, pivot);
            let (done, rest) = matrix.split_at_mut(column + 1);
            let lead = &done[column];
            for row in rest {
                let factor = row[column] / lead[column];
                row[column] = factor;
                if factor.norm() > 0.0 {
                    row[column + 1..].iter_mut().zip(&lead[column + 1..]).for_each(|(x, y)| *x -= factor * y);
                }
            }
        }
        Some(Factors { matrix, order, scales })
    }

    fn solve(&self, right: Vec<Complex64>) -> Vec<Complex64> {
        let size = self.matrix.len();
        let mut x: Vec<Complex64> = self.order.iter().map(|&row| right[row] / self.scales[row]).collect();
        for row in 0..size {
            let known: Complex64 = (0..row).map(|k| self.matrix[row][k] * x[k]).sum();
            x[row] -= known;
        }
        for row in (0..size).rev() {
            let known: Complex64 = (row + 1..size).map(|k| self.matrix[row][k] * x[k]).sum();
            x[row] = (x[row] - known) / self.matrix[row][row];
        }
        x
    }
}
