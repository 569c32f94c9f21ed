//! Calls everything public in `firmware-core` on inputs that the compiler knows nothing about. The panic handler calls
//! a function that nobody defines, so that the program links only when the optimiser has found no panic reachable.
//!
//! It is built, never run.
#![no_std]
#![no_main]

use core::fmt::{self, Write};
use core::hint::black_box;
use core::panic::PanicInfo;

use firmware_core::{Config, Pose, Present, Table, choose, which_branch};

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
        decisions(&slice);
    }
}

fn lookups(slice: &firmware_core::Slice<'_>) {
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
    for stretch in slice.stretches(black_box(0)) {
        say(&stretch.from_limit);
    }
}

fn decisions(slice: &firmware_core::Slice<'_>) {
    let pose = Pose {
        tip_angle_rad: black_box(0.0),
        mean_angle_rad: black_box(0.0),
    };
    match which_branch(slice, black_box(0.0), pose) {
        Ok(seat) => {
            black_box(seat);
        }
        Err(error) => say(&error),
    }
    let config = match Config::new(black_box(0.0)) {
        Ok(config) => config,
        Err(error) => return say(&error),
    };
    black_box(config.fold_distance());
    let present = Present {
        branch: black_box(0),
        setpoint: black_box(0.0),
    };
    say(&choose(slice, &config, present, black_box(0.0)));
}
