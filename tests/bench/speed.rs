//! How fast it is: `cargo bench`. Nothing is asserted; compare two runs in turn on a quiet machine.

mod material;

use divan::counter::BytesCount;
use divan::{Bencher, black_box};
use steadytap::reduction::{Options, reduce};
use steadytap::stream::Decoder;

fn main() {
    divan::main();
}

#[divan::bench]
fn rehold(bencher: Bencher<'_, '_>) {
    let record = material::record();
    bencher.counter(BytesCount::of_slice(&record)).bench(|| material::rehold(black_box(&record)));
}

#[divan::bench]
fn decode(bencher: Bencher<'_, '_>) {
    let setup = steadytap::cli::van().expect("the van's files are good");
    let mut decoder = Decoder::new(&setup.rig, &setup.rig.ports[0]);
    let fields = setup.rig.ports[0].columns.len();
    let line = (0..fields).map(|i| format!("{}.{:02}", 7 * i, 13 * i)).collect::<Vec<_>>().join(",");
    decoder.decode(line.as_bytes()).expect("a good line");
    bencher.counter(BytesCount::of_str(&line)).bench_local(|| decoder.decode(black_box(line.as_bytes())).is_ok());
}

#[divan::bench]
fn reduce_500_segments(bencher: Bencher<'_, '_>) {
    let sessions = [material::session(500)];
    bencher.bench(|| reduce(black_box(&sessions), &Options::default()).expect("enough passes"));
}
