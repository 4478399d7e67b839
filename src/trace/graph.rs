//! temp
/// temp
pub fn ends(p: &[[usize; 2]]) -> Vec<[usize; 2]> {
    let mut out = Vec::new();
    let far = |from: [usize; 2]| {
        *p.iter()
            .max_by_key(|q| {
                let (a, b) = (q[0] as i64 - from[0] as i64, q[1] as i64 - from[1] as i64);
                a * a + b * b
            })
            .unwrap()
    };
    if p.is_empty() {
        return out;
    }
    let a = far(p[0]);
    out.push(a);
    out.push(far(a));
    out
}
