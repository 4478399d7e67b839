//! temp
use ndarray::Array2;
/// temp
pub fn hysteresis(e: &Array2<f32>, low: f32, high: f32) -> Array2<bool> {
    let mut out = Array2::from_elem(e.dim(), false);
    let mut stack: Vec<[usize; 2]> = Vec::new();
    for ((r, c), &v) in e.indexed_iter() {
        if v >= high {
            out[[r, c]] = true;
            stack.push([r, c]);
        }
    }
    while let Some([r, c]) = stack.pop() {
        for dr in -1i32..=1 {
            for dc in -1i32..=1 {
                let (a, b) = (r as i32 + dr, c as i32 + dc);
                if a < 0 || b < 0 || a >= e.nrows() as i32 || b >= e.ncols() as i32 {
                    continue;
                }
                let p = [a as usize, b as usize];
                if !out[p] && e[p] >= low {
                    out[p] = true;
                    stack.push(p);
                }
            }
        }
    }
    out
}
/// temp
pub fn components(m: &Array2<bool>) -> Vec<Vec<[usize; 2]>> {
    let mut seen = m.mapv(|v| !v);
    let mut out = Vec::new();
    for r in 0..m.nrows() {
        for c in 0..m.ncols() {
            if seen[[r, c]] {
                continue;
            }
            seen[[r, c]] = true;
            let mut comp = vec![[r, c]];
            let mut i = 0;
            while i < comp.len() {
                let [r, c] = comp[i];
                i += 1;
                for dr in -1i32..=1 {
                    for dc in -1i32..=1 {
                        let (a, b) = (r as i32 + dr, c as i32 + dc);
                        if a < 0 || b < 0 || a >= m.nrows() as i32 || b >= m.ncols() as i32 {
                            continue;
                        }
                        let p = [a as usize, b as usize];
                        if !seen[p] {
                            seen[p] = true;
                            comp.push(p);
                        }
                    }
                }
            }
            out.push(comp);
        }
    }
    out
}
/// temp
pub fn clean(m: &Array2<bool>, least: usize) -> Array2<bool> {
    let mut out = Array2::from_elem(m.dim(), false);
    for c in components(m) {
        if c.len() >= least {
            for p in c {
                out[p] = true;
            }
        }
    }
    out
}
