use ndarray::Array2;
use veerlog::measure::{Scale, UsedFrame, measure};
use veerlog::scene::{Scene, SceneBuilder, SceneSettings};
use veerlog::trace::{
    TraceSettings, Tracer,
    edges::{Edges, Polyline},
    recent::Corrected,
};
fn main() {
    for run in std::env::args().skip(1) {
        go(&run);
    }
}
fn poly(v: &toml::Value) -> Polyline {
    let f = |v: &toml::Value| v.as_float().or(v.as_integer().map(|i| i as f64)).unwrap();
    Polyline::new(
        v.as_array()
            .unwrap()
            .iter()
            .map(|p| {
                let a = p.as_array().unwrap();
                [f(&a[0]), f(&a[1])]
            })
            .collect(),
    )
    .unwrap()
}
fn go(run: &str) {
    let text = std::fs::read_to_string(format!("{run}/run.toml")).unwrap();
    let m: toml::Table = text.parse().unwrap();
    let fr = m["frames"].as_table().unwrap();
    let bare = fr["bare"].as_integer().unwrap() as usize;
    let um = fr["um_per_px"].as_float().unwrap();
    let dt = fr["interval_s"]
        .as_float()
        .or(fr["interval_s"].as_integer().map(|i| i as f64))
        .unwrap();
    let darker = fr["filament"].as_str().unwrap() == "darker";
    let edges = Edges::new(
        poly(&m["cell"]["plating_edge"]),
        poly(&m["cell"]["far_edge"]),
    );
    let mut files: Vec<_> = glob::glob(&format!("{run}/frames/*.*"))
        .unwrap()
        .map(|p| p.unwrap())
        .collect();
    files.sort();
    let planes: Vec<Option<Array2<f32>>> = files
        .iter()
        .map(|f| {
            let img = image::open(f).ok()?.to_luma16();
            let (w, h) = img.dimensions();
            Some(Array2::from_shape_fn((h as usize, w as usize), |(r, c)| {
                f32::from(img.get_pixel(c as u32, r as u32).0[0]) / 257.0
            }))
        })
        .collect();
    let t0 = std::time::Instant::now();
    let settings = SceneSettings { darker };
    let scene = if bare > 0 {
        let mut b = SceneBuilder::new(settings);
        for p in planes.iter().take(bare).flatten() {
            b.push(p);
        }
        b.finish().unwrap()
    } else {
        Scene::without_bare(planes[0].as_ref().unwrap(), settings)
    };
    let mut tracer = Tracer::new(
        TraceSettings {
            bare,
            ..Default::default()
        },
        edges.clone(),
        scene.noise().clone(),
    );
    let mut guess = [0.0, 0.0];
    let mut used = Vec::new();
    let mut out = String::from("frame,drift_x,drift_y,noise_factor,sharp,expo\n");
    for (k, p) in planes.iter().enumerate() {
        let Some(p) = p else {
            eprintln!("{k}: undecodable");
            continue;
        };
        let metal = tracer.metal();
        let c = scene.correct(p, Some(&metal), guess);
        if let Some(v) = &c.verdict {
            eprintln!("{k}: {v}");
            continue;
        }
        guess = c.drift_px;
        out += &format!(
            "{k},{},{},{},{},{}\n",
            c.drift_px[0], c.drift_px[1], c.noise_factor, c.sharpness, c.exposure
        );
        if std::env::var("VR").is_ok() && k == 20 { let mut acc = vec![(0.0f64, 0.0f64, 0.0f64, 0usize); 30]; for ((r, cc), &v) in c.residual.indexed_iter() { let d = edges.depth([cc as f64, r as f64]); if v.is_finite() && d > -10.0 && d < 19.5 { let a = &mut acc[(d + 10.0) as usize]; a.0 += f64::from(v); a.1 += f64::from(v * v); a.2 += f64::from(scene.noise()[[r, cc]]); a.3 += 1; } } for (i, a) in acc.iter().enumerate() { let n = a.3 as f64; eprintln!("depth {} mean {:.4} rms {:.4} noise {:.4}", i as f64 - 10.0, a.0 / n, (a.1 / n).sqrt(), a.2 / n); } }
        tracer.push(Corrected {
            frame: k,
            residual: c.residual,
            noise_factor: c.noise_factor,
        });
        used.push(UsedFrame {
            frame: k,
            time_s: k as f64 * dt,
        });
    }
    let trace = tracer.finish();
    let load = |_: f64, _: [f64; 2]| veerlog::load::LoadState {
        direction_deg: Some(90.0),
        ..Default::default()
    };
    let scale = Scale {
        um_per_px: um,
        edges: &edges,
        used: &used,
        load: &load,
        noise: f64::from(scene.noise()[[scene.noise().nrows() / 2, scene.noise().ncols() / 2]]),
    };
    let rows = measure(&trace, &scale);
    eprintln!(
        "{run}: {:?} {} filaments {} paths withdrawn {} ; depth {:?}",
        t0.elapsed(),
        trace.filaments.len(),
        trace.paths.len(),
        trace.withdrawn,
        rows.frames.last().map(|r| (r.depth_um, r.tips))
    );
    let dir = format!("{run}/veerlog");
    std::fs::create_dir_all(format!("{dir}/tables")).unwrap();
    std::fs::write(format!("{dir}/scene.csv"), out).unwrap();
    let mut s = String::from(
        "frame,time_s,depth_um,depth_fraction,tips,filaments,length_um,growth_alignment,u_depth_um\n",
    );
    for r in &rows.frames {
        s += &format!(
            "{},{},{},{},{},{},{},{},{}\n",
            r.frame,
            r.time_s,
            r.depth_um.unwrap_or(0.0),
            r.depth_fraction.unwrap_or(0.0),
            r.tips.unwrap_or(0),
            r.filaments.unwrap_or(0),
            r.length_um.unwrap_or(0.0),
            r.growth_alignment.map_or(String::new(), |v| v.to_string()),
            r.u_depth_um.unwrap_or(0.0)
        );
    }
    std::fs::write(format!("{dir}/tables/frames.csv"), s).unwrap();
    let mut s = String::from("frame,filament,x_px,y_px,length_um,angle_deg,u_angle_deg\n");
    for r in &rows.growth {
        s += &format!(
            "{},{},{},{},{},{},{}\n",
            r.frame,
            r.filament,
            r.x_px,
            r.y_px,
            r.length_um,
            r.angle_deg,
            r.u_angle_deg.unwrap_or(0.0)
        );
    }
    std::fs::write(format!("{dir}/tables/growth.csv"), s).unwrap();
    let mut s = String::new();
    for p in &trace.paths {
        let pts: Vec<[f64; 4]> = p
            .points
            .iter()
            .map(|q| [q.x, q.y, q.arrival as f64 * dt, q.width])
            .collect();
        s += &serde_json::to_string(&serde_json::json!({"filament": p.filament, "path": p.path, "points": pts, "ends_in": p.ends_in})).unwrap();
        s.push('\n');
    }
    std::fs::write(format!("{dir}/traces.ndjson"), s).unwrap();
}
