//! The energy of arms drawn at random: its gradient and Hessian against finite differences, and its
//! value against the weight lifted, mass by mass.

use host_tests::random_arms;
use host_tests::tolerances::{ENERGY_BY_MASSES, FINITE_DIFFERENCE};
use proptest::prelude::*;
use table_gen::arm_file::{Arm, STANDARD_GRAVITY_M_S2};
use table_gen::rest_states::modes::{Evaluation, ModalRod};
use table_gen::rod::Rod;

/// Step of the central differences (rad): their error is then some 1e-10 from the third derivative
/// and as much from rounding.
const STEP: f64 = 1e-5;

fn evaluate(modal: &ModalRod, c: &[f64]) -> Evaluation {
    let mut at = Evaluation::new(modal.modes());
    modal.evaluate(c, &mut at);
    at
}

/// Mode coefficients of up to three radians, falling with the order.
fn shape() -> impl Strategy<Value = Vec<f64>> {
    proptest::collection::vec(-3.0..3.0, 2..12).prop_map(|c: Vec<f64>| {
        c.iter()
            .enumerate()
            .map(|(i, c)| c / (i + 1) as f64)
            .collect()
    })
}

/// Bending energy (J) and the height (m) times weight (N) of every mass, by the midpoint rule along
/// the arm: before the integration by parts that the rod's energy rests on.
fn energy_by_masses(arm: &Arm, modal: &ModalRod, c: &[f64]) -> f64 {
    const PIECES: usize = 20_000;
    let length = arm.spine.length_m;
    let width = 1.0 / PIECES as f64;
    let (mut energy, mut height, mut before) = (0.0, 0.0, 0.0);
    let mut lumps = arm.lumps.clone();
    lumps.sort_by(|a, b| a.at.total_cmp(&b.at));
    let mut lumps = lumps.into_iter().peekable();
    for k in 0..PIECES {
        let (start, middle) = (k as f64 * width, (k as f64 + 0.5) * width);
        let cos = (arm.base.tilt_rad + modal.angle(c, middle)).cos();
        let after = modal.angle(c, start + width);
        let curvature = (after - before) / (width * length);
        before = after;
        let spine = &arm.spine;
        let bend = curvature - spine.rest_curvature_rad_m.at(middle);
        energy += 0.5 * width * length * spine.bending_stiffness_n_m2.at(middle) * bend * bend;
        let mass_kg = spine.mass_per_length_kg_m.at(middle) * width * length;
        energy += STANDARD_GRAVITY_M_S2 * mass_kg * (height + 0.5 * width * length * cos);
        while let Some(lump) = lumps.next_if(|lump| lump.at <= start + width) {
            let at = height + (lump.at - start) * length * cos;
            energy += STANDARD_GRAVITY_M_S2 * lump.mass_kg * at;
        }
        height += width * length * cos;
    }
    energy + STANDARD_GRAVITY_M_S2 * arm.payload.mass_kg * height
}

proptest! {
    #![proptest_config(random_arms::draws(100))]

    #[test]
    fn gradient_and_hessian_are_the_energys_differences(arm in random_arms::arm(0.01..1.0), c in shape()) {
        let modal = ModalRod::new(&Rod::new(&arm), c.len());
        let at = evaluate(&modal, &c);
        for i in 0..c.len() {
            let beside = [-STEP, STEP].map(|step| {
                let mut moved = c.clone();
                moved[i] += step;
                evaluate(&modal, &moved)
            });
            let slope = (beside[1].energy - beside[0].energy) / (2.0 * STEP);
            prop_assert!((slope - at.gradient[i]).abs() <= FINITE_DIFFERENCE, "dU/dc_{i}: {} is not {slope}", at.gradient[i]);
            for j in 0..c.len() {
                let slope = (beside[1].gradient[j] - beside[0].gradient[j]) / (2.0 * STEP);
                let hessian: f64 = at.hessian[(i, j)];
                prop_assert!((slope - hessian).abs() <= FINITE_DIFFERENCE, "d2U/dc_{i}dc_{j}: {hessian} is not {slope}");
            }
        }
    }

    #[test]
    fn energy_is_bending_and_the_weight_lifted(arm in random_arms::arm(0.01..1.0), c in shape()) {
        let rod = Rod::new(&arm);
        let modal = ModalRod::new(&rod, c.len());
        let found = evaluate(&modal, &c).energy;
        let expected = energy_by_masses(&arm, &modal, &c) / rod.energy_scale_j;
        prop_assert!((found - expected).abs() <= ENERGY_BY_MASSES, "{found} is not {expected}");
    }
}
