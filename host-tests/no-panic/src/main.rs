//! Calls everything public in `firmware-core` on inputs that the compiler knows nothing about. The panic handler calls
//! a function that nobody defines, so that the program links only when the optimiser has found no panic reachable.
//!
//! It is built, never run.
#![no_std]
#![no_main]

use core::fmt::{self, Write};
use core::hint::black_box;
use core::panic::PanicInfo;

use firmware_core::supervisor::{
    self, Config, DriveFacts, Events, Input, Measured, Mode, Request, State,
};
use firmware_core::{
    Answer, Load, Payload, Pose, Present, Slice, Table, TensionPair, choose, which_branch,
};

unsafe extern "C" {
    /// Defined nowhere: the linker names it when a panic path is left.
    fn a_panic_path_is_left_in_firmware_core() -> !;
}

#[panic_handler]
fn panic(_: &PanicInfo<'_>) -> ! {
    // SAFETY: never runs; a program that could get here does not link.
    unsafe { a_panic_path_is_left_in_firmware_core() }
}

static BYTES: [u8; 4096] = [0; 4096];

/// The entry point that the linker looks for. `no_mangle` is unsafe because it may clash with another symbol; without
/// the start files there is none.
#[unsafe(no_mangle)]
pub extern "C" fn _start() -> ! {
    let len = black_box(BYTES.len());
    exercise(black_box(BYTES.get(..len).unwrap_or(&[])));
    #[cfg(feature = "deliberate-panic")]
    black_box(BYTES[len]);
    loop {
        core::hint::spin_loop();
    }
}

/// Takes text and forgets it.
struct Nowhere;

impl Write for Nowhere {
    fn write_str(&mut self, text: &str) -> fmt::Result {
        black_box(text);
        Ok(())
    }
}

fn say(message: &dyn fmt::Display) {
    let _ = black_box(write!(Nowhere, "{message}"));
}

fn exercise(bytes: &[u8]) {
    let table = match Table::new(bytes) {
        Ok(table) => black_box(table),
        Err(error) => return say(&error),
    };
    black_box((table.limits(), table.byte_len()));
    match table.header() {
        Ok(header) => {
            black_box(header);
        }
        Err(error) => say(&error),
    }
    for slice in table.slices() {
        lookups(&slice);
        stretches(&slice);
    }
    for payload in [Payload::Unknown, Payload::Known(black_box(0.0))] {
        match table.load(black_box(payload)) {
            Ok(load) => {
                together(&load);
                decisions(&load);
            }
            Err(error) => say(&error),
        }
    }
    match Config::for_arm(&table, &black_box(DriveFacts::default())) {
        Ok(config) => control_loop(&table, &config),
        Err(error) => say(&error),
    }
}

fn control_loop(table: &Table<'_>, config: &Config) {
    let mut settings = black_box(config.settings());
    settings.most_tries = black_box(3);
    let config = match Config::checked(settings, table) {
        Ok(config) => config,
        Err(error) => return say(&error),
    };
    let mut state = black_box(State::new());
    let input = Input {
        measured: Measured {
            tip_angle_rad: black_box(0.0),
            mid_angle_rad: black_box(0.0),
            tension_a_n: black_box(0.0),
            tension_b_n: black_box(0.0),
        },
        dt_s: black_box(0.0),
        request: Request {
            setpoint: black_box(0.0),
            branch: black_box(None),
            swing_permitted: black_box(true),
            payload: black_box(Payload::Unknown),
            stop: black_box(false),
            rearm: black_box(true),
        },
    };
    let output = supervisor::step(table, &config, &mut state, black_box(&input));
    say(&output.events);
    black_box((output, state.mode()));
    let events = Events::from_bits(black_box(7)).with(black_box(Events::NONE));
    for name in events.without(black_box(Events::NONE)).names() {
        black_box(name);
    }
    black_box((events.contains(Events::NONE), events.any(events)));
    black_box((events.is_empty(), events.bits()));
    black_box(black_box(Mode::Hold).may_become(black_box(Mode::Survey)));
    for way in supervisor::TRANSITIONS {
        black_box(way.when);
    }
}

fn lookups(slice: &Slice<'_>) {
    let setpoint: f32 = black_box(0.0);
    match slice.at(black_box(0), setpoint) {
        Ok(state) => {
            black_box(state.potential_j(slice.limits().drive));
        }
        Err(error) => say(&error),
    }
    for state in slice.all_at(setpoint) {
        black_box(state);
    }
    for branch in slice.branches() {
        black_box(branch.entry.map().t(setpoint));
        black_box(branch.knot_value(black_box(0), black_box(0)));
        for value in branch.knot_values() {
            black_box(value);
        }
        for exit in slice.exits(&branch) {
            black_box(exit);
        }
    }
    black_box((slice.branch(black_box(0)), slice.branch_count()));
}

fn stretches(slice: &Slice<'_>) {
    for usable in slice.stretches(black_box(0)) {
        say(&usable.entry.from_limit);
        black_box((usable.contains(black_box(0.0)), usable.point(black_box(0))));
        for value in usable.reserve_values() {
            black_box(value);
        }
        if let Some(reserves) = usable.reserves(black_box(0.0)) {
            say(&reserves);
        }
    }
    for crossing in slice.crossings() {
        say(&crossing);
        black_box((
            crossing.covers(black_box(0.0)),
            slice.survey.contains(black_box(1.0)),
        ));
    }
    let setpoint: f32 = black_box(0.0);
    black_box((
        slice.stretch_count(),
        slice.stretch_at(black_box(0), setpoint),
        slice.reserves(black_box(0), setpoint),
    ));
}

fn together(load: &Load<'_>) {
    let (branch, setpoint): (u8, f32) = (black_box(0), black_box(0.0));
    black_box((load.payload(), load.safe_at(branch, setpoint)));
    for slice in load.slices() {
        black_box(slice);
    }
    for number in load.branches() {
        black_box(number);
    }
    match load.state(branch, setpoint) {
        Ok(state) => {
            black_box(TensionPair::factor(state.couple_n_m, &load.limits()));
        }
        Err(error) => say(&error),
    }
    if let Some(reserves) = load.reserves(branch, setpoint) {
        black_box(reserves.worse(&reserves).to_values());
    }
}

fn decisions(load: &Load<'_>) {
    let pose = Pose {
        tip_angle_rad: black_box(0.0),
        mean_angle_rad: black_box(0.0),
    };
    match which_branch(load, black_box(0.0), pose) {
        Ok(seat) => {
            black_box(seat);
        }
        Err(error) => say(&error),
    }
    let present = Present {
        branch: black_box(0),
        setpoint: black_box(0.0),
    };
    let answer: Answer = choose(load, present, black_box(0.0));
    say(&answer);
}
