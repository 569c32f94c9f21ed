//! How long it takes to make the greenhouse wand's table, to find its margins in more and more corners, and to find and
//! classify one rest state.
//!
//! `cargo bench -p host-tests`

use criterion::{BatchSize, BenchmarkId, Criterion, criterion_group, criterion_main};
use std::hint::black_box;
use std::path::Path;
use table_gen::arm_file::{Arm, read};
use table_gen::margins::corners::{Corners, Levels};
use table_gen::margins::requirements::Assessor;
use table_gen::margins::usable::Usable;
use table_gen::rest_states::RestStates;
use table_gen::rest_states::curve::Solver;
use table_gen::rod::Rod;
use table_gen::table::tabulate;

fn wand() -> Arm {
    let file = Path::new(env!("CARGO_MANIFEST_DIR")).join("../examples/greenhouse-wand/arm.toml");
    read(&file).unwrap_or_else(|error| panic!("{error}"))
}

/// Setpoints without a pattern over the range of branches: fractional parts of multiples of the
/// golden ratio.
fn places() -> impl Iterator<Item = f64> {
    (1..).map(|k| (k as f64 * 0.618_033_988_749_894_9).fract())
}

fn whole_table(bench: &mut Criterion) {
    let arm = wand();
    bench.bench_function("whole greenhouse wand", |b| {
        b.iter(|| tabulate(black_box(&arm), &|_| {}).expect("the example tabulates"));
    });
}

/// Found from its neighbours on the branch, with Morse index, energy and couple.
fn one_rest_state(bench: &mut Criterion) {
    let arm = wand();
    let rest = RestStates::find(&Rod::new(&arm), &arm.accuracy, arm.gamma()).expect("certified");
    let mut solver = Solver::new(&rest.modal);
    let mut place = places();
    let mut branches = rest.branches.iter().cycle();
    bench.bench_function("one rest state, found and classified", |b| {
        b.iter_batched(
            || {
                let branch = branches.next().expect("an endless cycle");
                let x = place.next().expect("endless");
                (branch, branch.from() * (1.0 - x) + branch.to() * x)
            },
            |(branch, setpoint)| {
                branch
                    .state_at(&mut solver, setpoint)
                    .expect("on the branch")
            },
            BatchSize::SmallInput,
        );
    });
}

/// For comparison: one shot from the base, by whose kind the list is audited (dozens find one root).
fn one_shot(bench: &mut Criterion) {
    let arm = wand();
    let rest = RestStates::find(&Rod::new(&arm), &arm.accuracy, arm.gamma()).expect("certified");
    let mut place = places();
    bench.bench_function("one shot from the base", |b| {
        b.iter(|| {
            rest.shooting
                .shoot(black_box(8.0 * place.next().expect("endless") - 4.0))
        });
    });
}

/// All margins over the whole setpoint range, by the number of corners they are found in.
fn whole_margins(bench: &mut Criterion) {
    let arm = wand();
    let mut group = bench.benchmark_group("whole margins, corners");
    group.sample_size(10);
    for levels in [Levels::Nominal, Levels::Ends, Levels::EndsAndMiddle] {
        let corners = Corners::find(&arm, levels, &|_| {})
            .expect("certified")
            .arms
            .len();
        group.bench_function(BenchmarkId::from_parameter(corners), |b| {
            b.iter(|| {
                let corners = Corners::find(black_box(&arm), levels, &|_| {}).expect("certified");
                let assessor = Assessor::new(&arm, &corners);
                Usable::find(&assessor, &mut |_| {}).expect("rest states")
            });
        });
    }
    group.finish();
}

criterion_group! {
    name = rest_states;
    config = Criterion::default().sample_size(30).measurement_time(std::time::Duration::from_secs(3));
    targets = whole_table, whole_margins, one_rest_state, one_shot
}
criterion_main!(rest_states);
