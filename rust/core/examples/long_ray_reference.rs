//! Computes the reference times of long rays, `tests/long_rays/reference.csv`:
//!
//! `cargo run --release -p rayloom-core --example long_ray_reference > reference.csv`
//!
//! A reference is the earliest of several searches, from both ends, with finer
//! graphs and wider bounds than any quality level has. Each time belongs to a
//! valid path, so none is too early; a course that all searches miss stays
//! hidden.

#[path = "../tests/long_rays/cases.rs"]
mod cases;

use cases::{Roughness, ends, model, radius_km};
use rayloom_core::blocks::Blocks;
use rayloom_core::error::Result;
use rayloom_core::frame::{Chart, FlatChart, SphereChart};
use rayloom_core::monitor::Monitor;
use rayloom_core::quality::Quality;
use rayloom_core::rays::{Method, trace_between};

/// Nodes per edge of the coarse graph, and along each side of a fine face.
const GRAPHS: [(usize, usize); 3] = [(3, 12), (3, 16), (2, 16)];

fn generous((coarse_nodes, fine_nodes): (usize, usize)) -> Quality {
    let mut quality = Quality::thorough();
    quality.coarse_nodes = coarse_nodes;
    quality.fine_nodes = fine_nodes;
    quality.slack = 0.2;
    quality.last.chord_rounds = 6;
    quality.last.flip_rounds = 30;
    quality.last.flip_patience = 0.3;
    quality
}

/// Times of all pairs, start by start.
fn reference<C: Chart>(blocks: &Blocks<C>) -> Result<Vec<f64>> {
    let [starts, goals] = ends();
    let mut best = vec![f64::INFINITY; starts.len() * goals.len()];
    for graphs in GRAPHS {
        let choice = (Method::Bent, generous(graphs));
        for from_goals in [false, true] {
            let (near, far) = if from_goals {
                (&goals, &starts)
            } else {
                (&starts, &goals)
            };
            for (number, &point) in near.iter().enumerate() {
                let pairs: Vec<[u32; 2]> = (0..far.len() as u32).map(|other| [0, other]).collect();
                let rays =
                    trace_between(blocks, &[point], far, &pairs, choice, &Monitor::default())?;
                for (other, &time) in rays.time_s.iter().enumerate() {
                    let (start, goal) = if from_goals {
                        (other, number)
                    } else {
                        (number, other)
                    };
                    let known = &mut best[start * goals.len() + goal];
                    *known = known.min(time);
                }
            }
        }
    }
    Ok(best)
}

fn write_case<C: Chart>(frame: &str, name: &str, blocks: &Blocks<C>) -> Result<()> {
    let [starts, goals] = ends();
    let pairs: Vec<[u32; 2]> = (0..starts.len() as u32)
        .flat_map(|start| (0..goals.len() as u32).map(move |goal| [start, goal]))
        .collect();
    let choice = (Method::Straight, Quality::standard());
    let straight = trace_between(blocks, &starts, &goals, &pairs, choice, &Monitor::default())?;
    let times = reference(blocks)?;
    for ((pair, time), chord) in pairs.iter().zip(&times).zip(&straight.time_s) {
        let (from, to) = (starts[pair[0] as usize], goals[pair[1] as usize]);
        let at: Vec<String> = from
            .iter()
            .chain(&to)
            .map(|value| format!("{value:.9}"))
            .collect();
        println!("{frame},{name},{},{chord:.7},{time:.7}", at.join(","));
    }
    Ok(())
}

fn main() -> Result<()> {
    println!(
        "frame,roughness,from_x_km,from_y_km,from_depth_km,\
         to_x_km,to_y_km,to_depth_km,straight_s,time_s"
    );
    for (roughness, name) in Roughness::ALL {
        write_case("flat", name, &model(FlatChart, roughness))?;
        let sphere = SphereChart::new(radius_km());
        write_case("sphere", name, &model(sphere, roughness))?;
    }
    Ok(())
}
