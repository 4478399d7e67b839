//! temp
/// temp
pub fn thin_pixels(p: &[[usize; 2]]) -> Vec<[usize; 2]> {
    p.to_vec()
}
