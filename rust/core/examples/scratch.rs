use rayloom_core::blocks::Blocks;
use rayloom_core::frame::*;
use rayloom_core::monitor::Monitor;
use rayloom_core::rays::*;
use rayloom_core::tracer::*;
use std::time::Instant;

fn axis(n: usize, a: f64, h: f64) -> Vec<f64> { (0..=n).map(|i| a + i as f64 * h).collect() }
struct Rng(u64);
impl Rng { fn u(&mut self) -> f64 { self.0 ^= self.0 << 13; self.0 ^= self.0 >> 7; self.0 ^= self.0 << 17; (self.0 >> 11) as f64 / (1u64 << 53) as f64 } }

fn smooth(n: [usize; 3], h: f64, amp: f64, rng: &mut Rng) -> Vec<f64> {
    let mut waves = vec![];
    for _ in 0..40 { let k: Vec<f64> = (0..3).map(|_| (rng.u() - 0.5) * 2.0 * std::f64::consts::TAU / 250.0).collect(); waves.push((k, rng.u() * std::f64::consts::TAU)); }
    let mut f = vec![];
    for i in 0..n[0] { for j in 0..n[1] { for k in 0..n[2] { let x = [i as f64 * h, j as f64 * h, k as f64 * h]; f.push(waves.iter().map(|(w, p)| (w[0] * x[0] + w[1] * x[1] + w[2] * x[2] + p).sin()).sum::<f64>()); } } }
    let m = f.iter().fold(0.0f64, |a, &b| a.max(b.abs()));
    let mut s = vec![]; let mut q = 0;
    for _ in 0..n[0] { for _ in 0..n[1] { for k in 0..n[2] { let v = (6.0 + 0.004 * k as f64 * h) * (1.0 + amp * f[q] / m); q += 1; s.push(1.0 / v); } } }
    s
}
fn main() {
    let mut rng = Rng(88172645463325252);
    let kind = std::env::args().nth(1).unwrap_or("smooth".into());
    let sphere = std::env::args().nth(2).as_deref() == Some("sphere");
    let n = [75, 50, 40]; let h = 15.0;
    let count = n[0] * n[1] * n[2];
    let s = match kind.as_str() {
        "smooth" => smooth(n, h, 0.05, &mut rng),
        "homog" => vec![1.0 / 6.0; count],
        "checker" => (0..count).map(|b| { let (i, j, k) = (b / (n[1] * n[2]), b / n[2] % n[1], b % n[2]); let sg = if (i / 2 + j / 2 + k / 2) % 2 == 0 { 1.0 } else { -1.0 }; 1.0 / (6.0 * (1.0 + 0.05 * sg)) }).collect(),
        _ => (0..count).map(|_| 1.0 / (6.0 * (1.0 + 0.05 * (2.0 * rng.u() - 1.0)))).collect(),
    };
    let edges = if sphere { [axis(n[0], -560.0, h), axis(n[1], -375.0, h), axis(n[2], 0.0, h)] } else { [axis(n[0], 0.0, h), axis(n[1], 0.0, h), axis(n[2], 0.0, h)] };
    let o = [edges[0][0], edges[1][0]];
    let (ns, ne) = (6usize, 40usize);
    let src: Vec<[f64; 3]> = (0..ne).map(|_| [o[0] + 1125.0 * rng.u(), o[1] + 750.0 * rng.u(), 300.0 + 290.0 * rng.u()]).collect();
    let rec: Vec<[f64; 3]> = (0..ns).map(|_| [o[0] + 1125.0 * rng.u(), o[1] + 750.0 * rng.u(), 0.5]).collect();
    let pairs: Vec<[u32; 2]> = (0..ne as u32).flat_map(|e| (0..ns as u32).map(move |r| [e, r])).collect();
    let m = Monitor::default();
    macro_rules! go { ($b:expr) => {{ let b = $b;
        let run = |name: &str, method: Method, q: Quality| { let t = Instant::now(); let r = trace_between(&b, &src, &rec, &pairs, (method, q), &m).unwrap(); let e = t.elapsed().as_secs_f64(); println!("{name:12} {:.2} s wall, {:.2} ms cpu/ray  mean T {:.5} untraced {}", e, e * 2.0 / pairs.len() as f64 * 1e3, r.time_s.iter().sum::<f64>() / pairs.len() as f64, r.traced.iter().filter(|x| !**x).count()); r };
        run("graph2", Method::Graph, Quality::standard());
        run("graph3", Method::Graph, Quality::thorough());
        let st = run("standard", Method::Bent, Quality::standard());
        let th = run("thorough", Method::Bent, Quality::thorough());
        let mut q = Quality::standard(); q.fine_nodes = 0; q.last = q.first; run("coarse+newton", Method::Bent, q);
        q.fine_nodes = 12; q.fine_bias=0.0016; q.slack_s = 0.25; q.coarse_nodes = 3; q.first = Quality::thorough().first; q.last = Quality::thorough().last; q.last.flip_rounds = 30; q.last.chord_rounds=6; q.last.flip_patience_s = 1.0; let re = run("reference", Method::Bent, q);
        for (n, r) in [("standard", &st), ("thorough", &th)] { let mut d: Vec<f64> = (0..pairs.len()).map(|i| 1e3 * (r.time_s[i] - re.time_s[i].min(st.time_s[i]).min(th.time_s[i]))).collect(); d.sort_by(f64::total_cmp); let k = d.len(); println!("{n}: mean {:.2} p95 {:.1} max {:.1} >30 {:.1}%", d.iter().sum::<f64>() / k as f64, d[k * 95 / 100], d[k - 1], 100.0 * d.iter().filter(|x| **x > 30.0).count() as f64 / k as f64); }
    }} }
    if sphere { go!(Blocks::new(SphereChart::new(6371.0), edges, s).unwrap()) } else { go!(Blocks::new(FlatChart, edges, s).unwrap()) }
}
