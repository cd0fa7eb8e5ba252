//! The kernels with 32-byte vectors.
//!
//! The functions are safe to call wherever AVX2 is known to be there; `unsafe` is left in the loads and the stores, whose
//! references prove that the bytes are there.
#![allow(unsafe_code)]

use std::arch::x86_64::*;

use super::view::{View, ViewMut};
use super::{Block, Extremum, Job, Rows, RowsMut, scalar};

/// Bytes of a vector.
const LANE: usize = 32;

#[inline]
#[target_feature(enable = "avx2")]
fn load(bytes: &[u8; LANE]) -> __m256i {
    // SAFETY: the reference is to 32 readable bytes, and the load asks for no alignment.
    unsafe { _mm256_loadu_si256(bytes.as_ptr().cast()) }
}

#[inline]
#[target_feature(enable = "avx2")]
fn store(bytes: &mut [u8; LANE], vector: __m256i) {
    // SAFETY: the reference is to 32 writable bytes, and the store asks for no alignment.
    unsafe { _mm256_storeu_si256(bytes.as_mut_ptr().cast(), vector) }
}

#[inline]
#[target_feature(enable = "avx2")]
fn store_half(bytes: &mut [u8; 16], vector: __m128i) {
    // SAFETY: the reference is to 16 writable bytes, and the store asks for no alignment.
    unsafe { _mm_storeu_si128(bytes.as_mut_ptr().cast(), vector) }
}

/// See [`super::Level::slide`].
///
/// Columns are taken in tiles of up to 128 bytes, whose running values stay in registers. Every tile has its own part of
/// the suffix buffer, row after row; so the last tile may overlap the one before.
#[target_feature(enable = "avx2")]
pub(super) fn slide(op: Extremum, job: Job, src: Rows, dst: RowsMut, suffix: RowsMut) {
    if job.width_px < LANE {
        return scalar::slide(op, job, src, dst, suffix);
    }
    match op {
        Extremum::Least => slide_by::<false>(job, src, dst, suffix),
        Extremum::Greatest => slide_by::<true>(job, src, dst, suffix),
    }
}

#[target_feature(enable = "avx2")]
fn slide_by<const MAX: bool>(job: Job, src: Rows, mut dst: RowsMut, suffix: RowsMut) {
    let width = job.width_px;
    for block in job.blocks() {
        let src = src.from(block.src);
        let mut dst = dst.from(block.out);
        let mut rest = &mut *suffix.pixels;
        let mut x = 0;
        while x < width {
            let left = width - x;
            let step = match left {
                128.. => 128,
                64.. => 64,
                _ => LANE,
            };
            let own = rest
                .split_off_mut(..step * block.size)
                .expect("the suffix has room for every tile");
            let column = x.min(width - step);
            match step {
                128 => tile::<MAX, 128>(&block, column, src, &mut dst, own),
                64 => tile::<MAX, 64>(&block, column, src, &mut dst, own),
                _ => tile::<MAX, LANE>(&block, column, src, &mut dst, own),
            }
            x += step;
        }
    }
}

/// The running values of a tile's columns; tiles narrower than four vectors leave some unused.
type Values = [__m256i; 4];

#[inline]
#[target_feature(enable = "avx2")]
fn neutral<const MAX: bool>() -> Values {
    [if MAX {
        _mm256_setzero_si256()
    } else {
        _mm256_set1_epi8(-1)
    }; 4]
}

#[inline]
#[target_feature(enable = "avx2")]
fn join<const MAX: bool, const WIDTH: usize>(values: &Values, row: &[u8; WIDTH]) -> Values {
    let mut joined = *values;
    for (value, bytes) in joined.iter_mut().zip(row.as_chunks().0) {
        *value = match MAX {
            true => _mm256_max_epu8(*value, load(bytes)),
            false => _mm256_min_epu8(*value, load(bytes)),
        };
    }
    joined
}

#[inline]
#[target_feature(enable = "avx2")]
fn put<const WIDTH: usize>(row: &mut [u8; WIDTH], values: &Values) {
    for (bytes, &value) in row.as_chunks_mut().0.iter_mut().zip(values) {
        store(bytes, value);
    }
}

/// One block of `WIDTH` columns from `x` on.
#[inline]
#[target_feature(enable = "avx2")]
fn tile<const MAX: bool, const WIDTH: usize>(
    block: &Block,
    x: usize,
    src: Rows,
    dst: &mut RowsMut,
    suffix: &mut [u8],
) {
    let (suffix, _) = suffix.as_chunks_mut::<WIDTH>();
    let suffix = &mut suffix[..block.size];
    let src = View::<WIDTH>::new(src, x, block.rows_in);
    let mut dst = ViewMut::<WIDTH>::new(dst, x, block.end - block.skip);
    let mut prefix = neutral::<MAX>();
    let (inside, joined) = (block.rows_in, block.end.min(block.size - 1));
    for o in 0..block.skip.min(inside) {
        prefix = join::<MAX, WIDTH>(&prefix, src.row(o));
    }
    for o in block.skip..joined.min(inside) {
        prefix = join::<MAX, WIDTH>(&prefix, src.row(o));
        put(
            dst.row(o - block.skip),
            &join::<MAX, WIDTH>(&prefix, &suffix[o + 1]),
        );
    }
    for o in block.skip.max(inside)..joined {
        put(
            dst.row(o - block.skip),
            &join::<MAX, WIDTH>(&prefix, &suffix[o + 1]),
        );
    }
    if block.end == block.size {
        let last = block.size - 1;
        if last < inside {
            prefix = join::<MAX, WIDTH>(&prefix, src.row(last));
        }
        put(dst.row(last - block.skip), &prefix);
    }
    if block.is_last {
        return;
    }
    let mut backward = neutral::<MAX>();
    suffix[inside..]
        .iter_mut()
        .for_each(|row| put(row, &backward));
    for o in (0..inside).rev() {
        backward = join::<MAX, WIDTH>(&backward, src.row(o));
        put(&mut suffix[o], &backward);
    }
}

/// Columns and rows of a piece that is turned in registers.
const PIECE: (usize, usize) = (32, 16);

/// See [`super::Level::turn`].
#[target_feature(enable = "avx2")]
pub(super) fn turn(width: usize, height: usize, src: Rows, mut dst: RowsMut) {
    if width < PIECE.0 || height < PIECE.1 {
        return scalar::turn(width, height, src, dst);
    }
    // The last piece either way may overlap the one before: it writes the same bytes again.
    let columns = || (0..width).step_by(PIECE.0).map(|x| x.min(width - PIECE.0));
    let rows = || {
        (0..height)
            .step_by(PIECE.1)
            .map(|y| y.min(height - PIECE.1))
    };
    if width > height {
        columns().for_each(|x| rows().for_each(|y| turn_piece(x, y, src, &mut dst)));
    } else {
        rows().for_each(|y| columns().for_each(|x| turn_piece(x, y, src, &mut dst)));
    }
}

/// 16 rows of 32 columns. Interleaving the bytes of row `i` with those of row `i + 8` moves every address bit up by one
/// (with rotation) within each half of a vector; four times that swaps rows and columns.
#[inline]
#[target_feature(enable = "avx2")]
fn turn_piece(x: usize, y: usize, src: Rows, dst: &mut RowsMut) {
    let src = View::new(src, y * src.stride_px + x, 16);
    let start = x * dst.stride_px + y;
    let mut dst = ViewMut::new(dst, start, 32);
    let mut v: [__m256i; 16] = std::array::from_fn(|i| load(src.row(i)));
    for _ in 0..4 {
        let before = v;
        for i in 0..8 {
            v[2 * i] = _mm256_unpacklo_epi8(before[i], before[i + 8]);
            v[2 * i + 1] = _mm256_unpackhi_epi8(before[i], before[i + 8]);
        }
    }
    for (i, &v) in v.iter().enumerate() {
        store_half(dst.row(i), _mm256_castsi256_si128(v));
        store_half(dst.row(i + 16), _mm256_extracti128_si256::<1>(v));
    }
}

/// See [`super::Level::subtract`].
#[target_feature(enable = "avx2")]
pub(super) fn subtract(upper: &[u8], lower: &[u8], out: &mut [u8]) {
    let ((u, u_rest), (l, l_rest)) = (upper.as_chunks(), lower.as_chunks());
    let (o, o_rest) = out.as_chunks_mut();
    for ((o, u), l) in o.iter_mut().zip(u).zip(l) {
        store(o, _mm256_subs_epu8(load(u), load(l)));
    }
    scalar::subtract(u_rest, l_rest, o_rest);
}

/// See [`super::Level::mark`].
#[target_feature(enable = "avx2")]
pub(super) fn mark(row: &[u8], level: u8, bits: &mut [u64]) {
    let (words, rest) = row.as_chunks::<64>();
    let (whole, last) = bits.split_at_mut(words.len());
    for (bits, word) in whole.iter_mut().zip(words) {
        let [a, b] = halves(word);
        *bits = above(load(a), load(b), level);
    }
    scalar::mark(rest, level, last);
}

/// See [`super::Level::mark_difference`].
#[target_feature(enable = "avx2")]
pub(super) fn mark_difference(upper: &[u8], lower: &[u8], level: u8, bits: &mut [u64]) {
    let ((u, u_rest), (l, l_rest)) = (upper.as_chunks::<64>(), lower.as_chunks::<64>());
    let (whole, last) = bits.split_at_mut(u.len());
    for ((bits, u), l) in whole.iter_mut().zip(u).zip(l) {
        let ([ua, ub], [la, lb]) = (halves(u), halves(l));
        let a = _mm256_subs_epu8(load(ua), load(la));
        let b = _mm256_subs_epu8(load(ub), load(lb));
        *bits = above(a, b, level);
    }
    scalar::mark_difference(u_rest, l_rest, level, last);
}

fn halves(word: &[u8; 64]) -> [&[u8; LANE]; 2] {
    let (halves, _) = word.as_chunks();
    [&halves[0], &halves[1]]
}

/// A bit for each of 64 bytes that is above the level.
#[inline]
#[target_feature(enable = "avx2")]
fn above(low: __m256i, high: __m256i, level: u8) -> u64 {
    let level = _mm256_set1_epi8(level as i8);
    let not_above = |v| {
        let excess = _mm256_subs_epu8(v, level);
        let equal = _mm256_cmpeq_epi8(excess, _mm256_setzero_si256());
        _mm256_movemask_epi8(equal) as u32
    };
    !(u64::from(not_above(low)) | u64::from(not_above(high)) << 32)
}

#[cfg(test)]
mod tests {
    crate::stage::kernels::tests::stamp!("avx2");
}
