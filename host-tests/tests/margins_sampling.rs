//! Arms drawn from the whole tolerance box of the greenhouse wand, with the tip held and with a couple applied, have the reserves that the table, read by the
//! firmware, promises from its corners.
//!
//! A shortfall may not exceed what interpolating between the stored points overstates against the corners
//! themselves, which is measured first.

use firmware_core::{Load, Payload, Reserves, Table};
use host_tests::arms::wand;
use host_tests::tolerances::STORED;
use table_gen::arm_file::{Arm, Drive, Require};
use table_gen::margins::corners::{Corner, CornerArm, Corners};
use table_gen::margins::requirements::{Assessor, Look, Margins};
use table_gen::rest_states::RestStates;
use table_gen::rod::Rod;
use table_gen::table::{Tabulation, tabulate};

/// Arms drawn of either drive.
const ARMS: usize = 220;
/// Setpoints at which each is compared, for either kind of load.
const SETPOINTS: usize = 3;
/// Setpoints of each branch at which interpolation is compared with the corners themselves.
const MEASURED: usize = 24;
/// Seed of all draws.
const SEED: u64 = 20_251_201;

const NAMES: [&str; 9] = [
    "barrier (J)",
    "knock (N s)",
    "payload reserve (kg)",
    "stiffness reserve",
    "setpoint reserve (rad or N m)",
    "restoring stiffness (N m/rad)",
    "tension factor",
    "clearance (m)",
    "strain",
];
const STRAIN: usize = 8;

/// Reserves in the order of [`NAMES`]; `None` without bound.
type Values = [Option<f64>; 9];

/// Steele, Lea and Flood, Fast splittable pseudorandom number generators (2014): splitmix64.
struct Draws(u64);

impl Draws {
    /// Within `low..high`.
    fn within(&mut self, low: f64, high: f64) -> f64 {
        self.0 = self.0.wrapping_add(0x9e37_79b9_7f4a_7c15);
        let mut z = self.0;
        z = (z ^ (z >> 30)).wrapping_mul(0xbf58_476d_1ce4_e5b9);
        z = (z ^ (z >> 27)).wrapping_mul(0x94d0_49bb_1331_11eb);
        z ^= z >> 31;
        low + (high - low) * (z >> 11) as f64 / (1u64 << 53) as f64
    }
}

fn stored(reserves: &Reserves) -> Values {
    [
        reserves.barrier_j,
        reserves.knock_n_s,
        reserves.payload_reserve_kg,
        reserves.stiffness_reserve,
        reserves.setpoint_reserve,
        reserves.restoring_n_m_per_rad,
        reserves.tension_factor,
        reserves.clearance_m,
        Some(reserves.strain),
    ]
    .map(|value| value.map(f64::from))
}

/// One arm's own reserves; those against more payload and less stiffness are not one arm's alone.
fn of_margins(margins: &Margins) -> Values {
    [
        margins.barrier_j,
        margins.knock_n_s,
        None,
        margins.stiffness_reserve,
        margins.setpoint_reserve,
        Some(margins.restoring_n_m_per_rad),
        margins.tension_factor,
        margins.clearance_m,
        Some(margins.strain),
    ]
}

/// How much worse than `stored` the truth is.
fn shortfall(place: usize, stored: Option<f64>, truth: Option<f64>) -> f64 {
    match (stored, truth) {
        (_, None) => f64::NEG_INFINITY,
        (None, Some(_)) => f64::INFINITY,
        (Some(stored), Some(truth)) if place == STRAIN => truth - stored,
        (Some(stored), Some(truth)) => stored - truth,
    }
}

/// The worst of each.
fn worst(all: impl IntoIterator<Item = Values>) -> Values {
    all.into_iter().fold([None; 9], |mut worst, values| {
        for (place, (worst, value)) in worst.iter_mut().zip(values).enumerate() {
            let Some(value) = value else { continue };
            *worst = Some(match *worst {
                None => value,
                Some(worst) if place == STRAIN => worst.max(value),
                Some(worst) => worst.min(value),
            });
        }
        worst
    })
}

/// What interpolation between the stored points overstates, reserve by reserve, against the corners themselves; at
/// least the rounding to single precision.
fn overstated(made: &Tabulation, table: &Table) -> [f64; 9] {
    let assessor = Assessor::new(&made.arm, &made.corners);
    let mut overstated = [0.0f64; 9];
    for label in stable(&made.corners) {
        let [from, to] = cover(&made.corners, label);
        for k in 0..MEASURED {
            let setpoint = from + (to - from) * (k as f64 * 0.618_033_988_749_894_9).fract();
            let assessed = assessor
                .assess(setpoint, Some(label), None)
                .expect("rest states");
            for (slice, of_slice) in table.slices().enumerate() {
                let Some(said) = of_slice.reserves(label as u8, setpoint as f32) else {
                    continue;
                };
                let corners = made.corners.arms.iter().zip(&assessed[0].margins);
                let here = corners.filter_map(|(corner, look)| match look {
                    Look::There(margins) if corner.slice == slice => Some(of_margins(margins)),
                    _ => None,
                });
                let mut truth = worst(here);
                truth[2] = assessed[0].payload_reserve.map(|(reserve, _)| reserve);
                let said = stored(&said);
                for place in 0..9 {
                    let over = shortfall(place, said[place], truth[place]);
                    let rounding = STORED * said[place].unwrap_or(0.0).abs();
                    overstated[place] = overstated[place].max(over).max(rounding);
                }
            }
        }
    }
    overstated
}

fn stable(corners: &Corners) -> impl Iterator<Item = usize> {
    let branches = &corners.nominal.branches;
    (0..branches.len()).filter(|&label| branches[label].index == 0)
}

fn cover(corners: &Corners, label: usize) -> [f64; 2] {
    let nominal = &corners.nominal;
    let [lo, hi] = nominal.rod.setpoints;
    let branch = &nominal.branches[label];
    [branch.from().max(lo), branch.to().min(hi)].map(|setpoint| nominal.rod.setpoint_si(setpoint))
}

/// An arm of the tolerance box as the only corner. `Err` holds what went wrong.
fn drawn(arm: &Arm, corners: &Corners, draws: &mut Draws) -> Result<Corners, String> {
    let [lightest, heaviest] = arm.payload.range_kg;
    let payload_kg = draws.within(lightest, heaviest);
    let stiffness = arm.tolerance.stiffness_fraction * draws.within(-1.0, 1.0);
    let tilt_rad = arm.base.tolerance_rad * draws.within(-1.0, 1.0);
    let own = arm.varied(payload_kg, 1.0 + stiffness, tilt_rad);
    let corner = Corner {
        payload_kg,
        stiffness_percent: 100.0 * stiffness,
        tilt_deg: tilt_rad.to_degrees(),
    };
    let rest = RestStates::find(&Rod::new(&own), &arm.accuracy, own.gamma())
        .map_err(|error| format!("{corner:?}: {error}"))?;
    Ok(Corners {
        nominal: corners.nominal.clone(),
        payloads_kg: vec![payload_kg],
        nominal_slice: 0,
        arms: vec![CornerArm {
            corner,
            slice: 0,
            is_heaviest: true,
            is_softest: true,
            arm: own,
            rest,
        }],
    })
}

/// A safe setpoint of `load`, with its branch.
fn safe_setpoint(corners: &Corners, load: &Load, draws: &mut Draws) -> (usize, f64) {
    let labels: Vec<usize> = stable(corners).collect();
    for _ in 0..10_000 {
        let label = labels[draws.within(0.0, labels.len() as f64) as usize];
        let [from, to] = cover(corners, label);
        // As the firmware sees it.
        let setpoint = draws.within(from, to) as f32;
        if load.safe_at(label as u8, setpoint) {
            return (label, f64::from(setpoint));
        }
    }
    panic!("nothing is safe with {:?}", load.payload())
}

/// The worst shortfall of each reserve, and where.
struct Worst([(f64, String); 9]);

impl Worst {
    fn new() -> Self {
        Self(std::array::from_fn(|_| (f64::NEG_INFINITY, String::new())))
    }

    fn add(&mut self, place: usize, shortfall: f64, what: impl FnOnce() -> String) {
        if shortfall > self.0[place].0 {
            self.0[place] = (shortfall, what());
        }
    }
}

/// Compares one drawn arm; everything found is added to `worst`.
fn compare(own: &Corners, made: &Tabulation, table: &Table, draws: &mut Draws, worst: &mut Worst) {
    let arm = &made.arm;
    let corner = own.arms[0].corner;
    let assessor = Assessor::new(arm, own);
    let known = Payload::Known(corner.payload_kg as f32);
    for payload in [Payload::Unknown, known] {
        let load = table.load(payload).expect("a payload of the range");
        for _ in 0..SETPOINTS {
            let (label, setpoint) = safe_setpoint(&made.corners, &load, draws);
            let said = stored(&load.reserves(label as u8, setpoint as f32).expect("safe"));
            let what =
                || format!("{payload:?}, branch {label}, setpoint {setpoint:.5}, {corner:?}");
            let assessed = assessor
                .assess(setpoint, Some(label), None)
                .unwrap_or_else(|error| panic!("{}: {error}", what()));
            let Look::There(margins) = assessed[0].margins[0] else {
                panic!("{}: not stable there", what())
            };
            let mut truth = of_margins(&margins);
            // Both are counted from the worst of the tolerance, which this arm has not reached.
            let softening = 0.01 * corner.stiffness_percent + arm.tolerance.stiffness_fraction;
            truth[3] = truth[3].map(|reserve| reserve - softening);
            let loading_kg = arm.payload.range_kg[1] - corner.payload_kg;
            truth[2] = assessed[0]
                .payload_reserve
                .map(|(reserve, _)| reserve - loading_kg);
            for place in 0..9 {
                worst.add(place, shortfall(place, said[place], truth[place]), || {
                    format!(
                        "{:?} stored, {:?} found: {}",
                        said[place],
                        truth[place],
                        what()
                    )
                });
            }
        }
    }
}

#[test]
fn no_wand_of_the_tolerance_box_has_less_than_its_table_says() {
    no_arm_has_less_than_stored(&wand());
}

/// With a couple the arm is lost when its stiffness falls, so that this reserve has a bound too.
#[test]
fn no_wand_under_a_couple_has_less_than_its_table_says() {
    let mut arm = wand();
    arm.drive = Drive::AppliedCouple {
        setpoints_n_m: [-0.16, 0.16],
    };
    arm.require = Require::default_for(&arm.drive);
    no_arm_has_less_than_stored(&arm);
}

fn no_arm_has_less_than_stored(arm: &Arm) {
    let made = &tabulate(arm, &|_| {}).unwrap_or_else(|error| panic!("{error}"));
    let table = Table::new(&made.bytes).expect("a table");
    let overstated = overstated(made, &table);
    let mut worst = Worst::new();
    let mut failed = Vec::new();
    println!("seed of the draws: {SEED}");
    let halves = std::thread::scope(|scope| {
        let half = |half: u64| {
            scope.spawn(move || {
                let mut draws = Draws(SEED + half);
                let (mut worst, mut failed) = (Worst::new(), Vec::new());
                for _ in 0..ARMS / 2 {
                    match drawn(&made.arm, &made.corners, &mut draws) {
                        Ok(own) => compare(&own, made, &table, &mut draws, &mut worst),
                        Err(error) => failed.push(error),
                    }
                }
                (worst, failed)
            })
        };
        let halves = [half(0), half(1)];
        halves.map(|half| half.join().expect("no arm panics"))
    });
    for (half, half_failed) in halves {
        failed.extend(half_failed);
        for (place, (shortfall, what)) in half.0.into_iter().enumerate() {
            worst.add(place, shortfall, || what);
        }
    }
    println!(
        "worst shortfall of {ARMS} arms, and what interpolation overstates against the corners:"
    );
    for (place, (shortfall, what)) in worst.0.iter().enumerate() {
        println!(
            "{:30} {shortfall:10.2e} {:10.2e}  {what}",
            NAMES[place], overstated[place]
        );
    }
    assert!(
        failed.is_empty(),
        "{} arms without rest states: {failed:#?}",
        failed.len()
    );
    for (place, (shortfall, what)) in worst.0.iter().enumerate() {
        assert!(
            *shortfall <= overstated[place],
            "{}: an arm has {shortfall:e} less than stored, interpolation overstates {:e}: {what}",
            NAMES[place],
            overstated[place]
        );
    }
}
