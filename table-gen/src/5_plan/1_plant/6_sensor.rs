//! A sensor with noise, bias, delay, quantisation and faults.

use super::options::{SensorFault, SensorOptions};
use rand_chacha::ChaCha8Rng;
use rand_chacha::rand_core::Rng;
use std::collections::VecDeque;
use std::f64::consts::TAU;

/// One sensor; read once per control tick.
#[derive(Clone, Debug)]
pub(super) struct Sensor {
    options: SensorOptions,
    fault: SensorFault,
    /// Readings under way, oldest first.
    under_way: VecDeque<f64>,
    last: Option<f64>,
}

impl Sensor {
    pub fn new(options: SensorOptions) -> Self {
        Self {
            options,
            fault: SensorFault::None,
            under_way: VecDeque::new(),
            last: None,
        }
    }

    pub fn set_fault(&mut self, fault: SensorFault) {
        self.fault = fault;
    }

    /// The reading of this tick, of `truth` as it was `delay_ticks` ago. Noise is drawn on every tick, faults or not, so
    /// that a fault in one sensor leaves the readings of the others as they would be without it.
    pub fn read(&mut self, truth: f64, rng: &mut ChaCha8Rng) -> f64 {
        let mut reading = truth + self.options.bias + self.options.noise * normal(rng);
        if self.options.quantum > 0.0 {
            reading = (reading / self.options.quantum).round() * self.options.quantum;
        }
        self.under_way.push_back(reading);
        // Before the first reading has come through, it is all there is.
        let due = self.under_way[0];
        if self.under_way.len() > self.options.delay_ticks {
            self.under_way.pop_front();
        }
        let seen = match self.fault {
            SensorFault::None => due,
            SensorFault::Frozen => self.last.unwrap_or(due),
            SensorFault::Dropout => return f64::NAN,
            SensorFault::Offset(offset) => due + offset,
        };
        self.last = Some(seen);
        seen
    }
}

/// A standard normal deviate (Box and Muller, A Note on the Generation of Random Normal Deviates, 1958).
fn normal(rng: &mut ChaCha8Rng) -> f64 {
    // Uniform on 2^53 steps of (0, 1]: its logarithm is finite.
    let mut uniform = || ((rng.next_u64() >> 11) + 1) as f64 / (1_u64 << 53) as f64;
    let radius = (-2.0 * uniform().ln()).sqrt();
    radius * (TAU * uniform()).cos()
}
