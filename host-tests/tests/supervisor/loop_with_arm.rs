//! The wand's table, with crossings, and the loop around the simulated wand.

use firmware_core::format::write::{
    BranchContents, Contents, SliceContents, StretchContents, buffer_len, write,
};
use firmware_core::supervisor::{
    Config, DriveFacts, Events, Input, Measured, Mode, Output, Request, State, step,
};
use firmware_core::{BranchEntry, Crossing, Payload, Stretch, SurveyBand, Table};
use host_tests::arms::crossing;
use std::sync::OnceLock;
use table_gen::arm_file;
use table_gen::plan::plant::{Plant, PlantOptions};
use table_gen::rest_states::curve::Solver;
use table_gen::table::{Tabulation, tabulate};

/// Time between ticks.
pub const TICK_S: f64 = 0.001;

/// Stiffness for which crossings may be made here.
const BAND: SurveyBand = SurveyBand { lo: 0.85, hi: 1.15 };

/// The wand, tabulated once.
pub fn wand() -> &'static Tabulation {
    static WAND: OnceLock<Tabulation> = OnceLock::new();
    WAND.get_or_init(|| {
        let text = include_str!("../../../examples/greenhouse-wand/arm.toml");
        let arm = arm_file::parse(text, "greenhouse-wand/arm.toml").expect("the example is good");
        tabulate(&arm, &|_| {}).expect("the example can be tabulated")
    })
}

/// The wand's table with the crossings tried here in every slice.
pub fn table_bytes() -> &'static [u8] {
    static BYTES: OnceLock<Vec<u8>> = OnceLock::new();
    BYTES.get_or_init(|| {
        let plans = [crossing(0, 2), crossing(2, 0)];
        with_crossings(&wand().bytes, BAND, &plans)
    })
}

/// The same table with these crossings in every slice.
pub fn with_crossings(bytes: &[u8], survey: SurveyBand, crossings: &[Crossing]) -> Vec<u8> {
    type Slice = (f32, Vec<(BranchEntry, Vec<f32>)>, Vec<(Stretch, Vec<f32>)>);
    let table = Table::new(bytes).expect("a sound table");
    let slices: Vec<Slice> = table
        .slices()
        .map(|slice| {
            let branches = slice.branches();
            let stretches = slice.branches().flat_map(|b| slice.stretches(b.number));
            (
                slice.payload_kg,
                branches
                    .map(|branch| (branch.entry, branch.knot_values().collect()))
                    .collect(),
                stretches
                    .map(|usable| (usable.entry, usable.reserve_values().collect()))
                    .collect(),
            )
        })
        .collect();
    let branches: Vec<Vec<BranchContents>> = slices
        .iter()
        .map(|(_, branches, _)| {
            branches
                .iter()
                .map(|(entry, knots)| BranchContents {
                    entry: *entry,
                    knots,
                })
                .collect()
        })
        .collect();
    let stretches: Vec<Vec<StretchContents>> = slices
        .iter()
        .map(|(_, _, stretches)| {
            stretches
                .iter()
                .map(|(entry, reserves)| StretchContents {
                    entry: *entry,
                    reserves,
                })
                .collect()
        })
        .collect();
    let contents: Vec<SliceContents> = slices
        .iter()
        .enumerate()
        .map(|(number, (payload_kg, ..))| SliceContents {
            payload_kg: *payload_kg,
            branches: &branches[number],
            stretches: &stretches[number],
            survey,
            // Where the wand with this payload may rest on either side.
            crossings: if *payload_kg == table.limits().nominal_payload_kg {
                crossings
            } else {
                &[]
            },
        })
        .collect();
    let contents = Contents {
        header: table.header().expect("a sound header"),
        slices: &contents,
    };
    let mut out = vec![0; buffer_len(&contents)];
    let len = write(&contents, &mut out).expect("fits the format");
    out.truncate(len);
    out
}

/// The firmware in a loop with the simulated wand.
pub struct Loop {
    pub table: Table<'static>,
    pub config: Config,
    pub state: State,
    pub plant: Plant,
    pub request: Request,
    pub last: Output,
    /// Everything noticed so far.
    pub seen: Events,
    /// Largest couple commanded (N m).
    pub peak_couple_n_m: f64,
    /// Fastest tip (m/s).
    pub peak_speed_m_s: f64,
    /// Largest tip angle (rad).
    pub farthest_tip_rad: f64,
}

impl Loop {
    /// The nominal wand at rest on a branch of the table, carrying its nominal payload.
    pub fn at_rest(branch: usize, setpoint_rad: f64) -> Self {
        Self::with(branch, setpoint_rad, PlantOptions::default())
    }

    pub fn with(branch: usize, setpoint_rad: f64, options: PlantOptions) -> Self {
        Self::on(wand(), table_bytes(), branch, setpoint_rad, options)
    }

    /// An arm and its table, at rest on a branch.
    pub fn on(
        made: &Tabulation,
        bytes: &'static [u8],
        branch: usize,
        setpoint_rad: f64,
        options: PlantOptions,
    ) -> Self {
        let rest = &made.corners.nominal;
        let states = rest
            .at(
                &mut Solver::new(&rest.modal),
                rest.rod.setpoint_from_si(setpoint_rad),
            )
            .expect("rest states at every setpoint");
        let (_, point) = states
            .iter()
            .find(|(number, _)| *number == branch)
            .expect("the branch reaches the setpoint");
        let mut plant = Plant::new(&made.arm, options);
        let tensions = plant.set_rest(&point.c).expect("rests there");
        let table = Table::new(bytes).expect("a sound table");
        let config = Config::for_arm(&table, &DriveFacts::default()).expect("sound settings");
        let request = Request {
            setpoint: setpoint_rad as f32,
            branch: None,
            swing_permitted: false,
            payload: Payload::Known(table.limits().nominal_payload_kg),
            stop: false,
            rearm: false,
        };
        let mut state = State::new();
        let input = input(&mut plant, request);
        let last = step(&table, &config, &mut state, &input);
        let mut arm = Self {
            table,
            config,
            state,
            plant,
            request,
            last,
            seen: Events::NONE,
            peak_couple_n_m: 0.0,
            peak_speed_m_s: 0.0,
            farthest_tip_rad: 0.0,
        };
        arm.plant.step(TICK_S, tensions).expect("at rest");
        arm
    }

    /// With other plans for the nominal payload.
    pub fn with_plans(mut self, plans: &[Crossing]) -> Self {
        // A table lives as long as the program does, as in the flash of a board.
        let bytes: &'static [u8] = with_crossings(&wand().bytes, BAND, plans).leak();
        self.table = Table::new(bytes).expect("a sound table");
        self
    }

    /// Arms and waits until it holds.
    pub fn arm(&mut self) {
        self.request.rearm = true;
        for _ in 0..5000 {
            self.tick();
            if self.last.mode == Mode::Hold {
                self.request.rearm = false;
                return;
            }
        }
        panic!("not armed: {}, {:?}", self.seen, self.last);
    }

    pub fn tick(&mut self) {
        let input = input(&mut self.plant, self.request);
        self.last = step(&self.table, &self.config, &mut self.state, &input);
        self.seen |= self.last.events;
        let limits = self.table.limits();
        let (a, b) = (self.last.tensions.a_n, self.last.tensions.b_n);
        for tension in [a, b] {
            assert!(
                limits.pretension_n <= tension && tension <= limits.max_tension_n,
                "{tension}"
            );
        }
        let couple = f64::from((a - b).abs() * limits.offset_m);
        self.peak_couple_n_m = self.peak_couple_n_m.max(couple);
        self.plant
            .step(TICK_S, [a.into(), b.into()])
            .expect("the motion can be followed");
        let tip = self.plant.tip();
        self.peak_speed_m_s = self.peak_speed_m_s.max(tip.speed_m_s());
        self.farthest_tip_rad = self.farthest_tip_rad.max(tip.angle_rad.abs());
    }

    pub fn run(&mut self, seconds: f64) {
        for _ in 0..(seconds / TICK_S).round() as u32 {
            self.tick();
        }
    }

    /// Runs until a mode is reached; false when it is not within `seconds`.
    pub fn until(&mut self, mode: Mode, seconds: f64) -> bool {
        for _ in 0..(seconds / TICK_S).round() as u32 {
            self.tick();
            if self.last.mode == mode {
                return true;
            }
        }
        false
    }

    /// True mean angle.
    pub fn mean(&self) -> f64 {
        let c = self.plant.curvature_modes();
        0.5 * c[0] - c[1] / 6.0
    }
}

fn input(plant: &mut Plant, request: Request) -> Input {
    let sensed = plant.sense();
    Input {
        measured: Measured {
            tip_angle_rad: sensed.tip_angle_rad as f32,
            mid_angle_rad: sensed.mid_angle_rad as f32,
            tension_a_n: sensed.tension_n[0] as f32,
            tension_b_n: sensed.tension_n[1] as f32,
        },
        dt_s: TICK_S as f32,
        request,
    }
}
