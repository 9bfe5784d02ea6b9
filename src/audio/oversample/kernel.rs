//! The inner product everything here spends its time in.

/// Partial sums kept in flight: enough to hide the latency of an addition, and the multiple that
/// every branch length is rounded to.
pub(super) const LANES: usize = 4;

/// Σ x·h over two slices of one length, a multiple of [`LANES`], always added in the same order.
#[inline]
pub(super) fn dot(x: &[f64], h: &[f64]) -> f64 {
    let mut sums = [0.0; LANES];
    for (x, h) in x.chunks_exact(LANES).zip(h.chunks_exact(LANES)) {
        for lane in 0..LANES {
            sums[lane] += x[lane] * h[lane];
        }
    }
    (sums[0] + sums[2]) + (sums[1] + sums[3])
}
