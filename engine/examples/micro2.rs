use neap_engine::math::*;
use std::time::Instant;
fn main() {
    let mut r = Row::ZERO;
    let mut st = 1u64;
    for l in r.iter_mut() {
        st = st.wrapping_mul(6364136223846793005).wrapping_add(1442695040888963407);
        let u = ((st >> 12) as f64 + 0.5) / 4503599627370496.0;
        *l = exp(0.44 * normal_quantile(u)) * 5.0;
    }
    let q = |p: f64| exp(0.44 * normal_quantile(p)) * 5.0;
    let d = 4.5 / 204.0;
    let br: Vec<(f64, f64)> = [0.05, 0.25, 0.5, 0.75, 0.95]
        .iter()
        .map(|&p: &f64| {
            let s = d * (p * (1.0 - p)).sqrt();
            (q(p - s), q(p + s))
        })
        .collect();
    for (name, s) in [
        ("5 brackets", Sieve::wide(&br, &[])),
        ("5+2", Sieve::wide(&br, &[2.0, 8.0f64.next_up()])),
        ("edges", Sieve::wide(&[], &[2.0, 8.0f64.next_up()])),
    ] {
        let mut k = s.nothing(4096);
        let mut best = 1e9f64;
        for _ in 0..2000 {
            k.values.clear();
            let t = Instant::now();
            for _ in 0..32 {
                s.sift(&r, 1.5 / 1.5, 256, &mut k);
                if k.values.len() > 3000 {
                    k.values.clear()
                }
            }
            best = best.min(t.elapsed().as_secs_f64() / 32.0);
        }
        println!("{name}: {:.1} ns/row {:.3} ns/value kept {}", best * 1e9, best * 1e9 / 256.0, k.values.len());
    }
}
