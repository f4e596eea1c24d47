//! Simulated maps of every kind of motion.
#![allow(clippy::print_stdout)]

mod drawn;
mod measured;

use drawn::{Observation, SCENES, draw};
use inrush::fit::Workspace;
use inrush::line::find;
use inrush::numeric::Estimate;
use inrush::simulate::grid::simulate_grid;
use measured::measured;
use std::error::Error;

fn main() -> Result<(), Box<dyn Error>> {
    let arguments: Vec<String> = std::env::args().collect();
    let number = |index: usize| arguments[index].parse::<u64>();
    let (first, count) = (number(2)?, number(3)?);
    let ratio = number(4)? as f64;
    let lines = (find("HCO+ 1-0")?, find("H13CO+ 1-0")?);
    let mut workspace = Workspace::default();
    println!(
        "scene,seed,radius,cx,cy,dx,dy,v,v_err,w,w_err,it,it_err,ik,ik_err,a,a_err,d,d_err,ds,m,m_err,s,s_err,pk,pk_err"
    );
    for scene in SCENES {
        for seed in first..first + count {
            let observation = Observation {
                signal_to_noise: [ratio, ratio],
                smooth_noise: seed % 2 == 1,
            };
            let truth = draw(scene, seed, observation);
            let grid = simulate_grid(&truth, (&lines.0, &lines.1))?;
            for one in measured(&grid, &lines, arguments[1] == "fits", &mut workspace) {
                let text = |estimate: Option<Estimate>| {
                    estimate.map_or("nan,nan".to_owned(), |one| {
                        format!("{:.6},{:.6}", one.value, one.err)
                    })
                };
                println!(
                    "{},{seed},{:.2},{:.2},{:.2},{},{},{},{},{},{},{},{},{:.5},{},{},{}",
                    scene.name,
                    truth.clump.radius_arcsec,
                    truth.centre_arcsec[0],
                    truth.centre_arcsec[1],
                    one.dx_arcsec,
                    one.dy_arcsec,
                    text(one.thin.map(|line| line.v_km_s)),
                    text(one.thin.map(|line| line.fwhm_km_s)),
                    text(Some(one.measures.integral_thin_k_km_s)),
                    text(Some(one.measures.integral_thick_k_km_s)),
                    text(one.measures.asymmetry),
                    text(one.measures.delta_v),
                    one.measures.delta_v_systematic.unwrap_or(f64::NAN),
                    text(one.mean_thick_km_s),
                    text(one.v_in_km_s),
                    text(one.measures.peak_thick_k),
                );
            }
        }
    }
    Ok(())
}
