use neap_engine::{course::March, diagnostic::Source, math::*, plan::*, scenario::*};
use std::time::Instant;
fn main() {
    let sc =
        Scenario::parse(Source { name: "w".into(), text: include_str!("../benches/data/w1.toml").into() }).unwrap();
    let plan = Plan::new(sc, &Limits { threads: 1, memory: 1 << 30 }).unwrap();
    let mut cov = vec![Row::ZERO; plan.cohort.len()];
    let mut par = vec![Row::ZERO; plan.individuals.len()];
    let mut scr = vec![Row::ZERO; plan.individuals.scratch()];
    let mut m = March::new(plan.structure, &plan.timetable);
    let mut best = [1e9f64; 3];
    for b in 0..2000u64 {
        let t0 = Instant::now();
        plan.cohort.fill(b * 256, &mut cov);
        plan.individuals.fill(b * 256, &cov, &mut par, &mut scr);
        let t1 = Instant::now();
        m.start(&plan.timetable, |r| plan.individuals.index(r).map(|i| &par[i]));
        let t2 = Instant::now();
        for i in (0..169usize).step_by(8) {
            m.advance(&plan.timetable, i..169.min(i + 8));
        }
        let t3 = Instant::now();
        for (k, d) in [t1 - t0, t2 - t1, t3 - t2].iter().enumerate() {
            best[k] = best[k].min(d.as_secs_f64());
        }
    }
    println!(
        "per block us: draw {:.2} start {:.2} march {:.2}; march ns/value {:.3}",
        best[0] * 1e6,
        best[1] * 1e6,
        best[2] * 1e6,
        best[2] * 1e9 / (169.0 * 256.0)
    );
}
