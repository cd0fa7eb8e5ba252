//! The kernels with 32-byte vectors.
//!
//! The functions are safe to call wherever AVX2 is known to be there; `unsafe` is left in the loads and the stores, whose
//! references prove that the bytes are there.
#![allow(unsafe_code)]

use std::arch::x86_64::*;

use super::view::{View, ViewMut};
use super::{Block, Cut, Extremum, Job, Rows, RowsMut, scalar};

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

super::wide::slide! {
    feature: "avx2",
    vector: __m256i,
    lane: 32,
    zero: _mm256_setzero_si256(),
    ones: _mm256_set1_epi8(-1),
    least: _mm256_min_epu8,
    greatest: _mm256_max_epu8,
    narrower: scalar::slide,
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
    let (columns, rows) = (width.div_ceil(PIECE.0), height.div_ceil(PIECE.1));
    for i in 0..columns * rows {
        // Along the longer side last, so that what is written stays near what was written before.
        let (column, row) = match width > height {
            true => (i / rows, i % rows),
            false => (i % columns, i / columns),
        };
        let (x, y) = (PIECE.0 * column, PIECE.1 * row);
        turn_piece(
            x.min(width - PIECE.0),
            y.min(height - PIECE.1),
            src,
            &mut dst,
        );
    }
}

/// 16 rows of 32 columns. Interleaving the bytes of row `i` with those of row `i + 8` moves every address bit up by one
/// (with rotation) within each half of a vector; four times that swaps rows and columns.
#[inline]
#[target_feature(enable = "avx2")]
fn turn_piece(x: usize, y: usize, src: Rows, dst: &mut RowsMut) {
    let src = View::new(src, y * src.stride_px + x, 16);
    let start = x * dst.stride_px + y;
    let mut dst = ViewMut::new(dst.from(0), start, 32);
    let v = [
        load(src.row(0)),
        load(src.row(1)),
        load(src.row(2)),
        load(src.row(3)),
        load(src.row(4)),
        load(src.row(5)),
        load(src.row(6)),
        load(src.row(7)),
        load(src.row(8)),
        load(src.row(9)),
        load(src.row(10)),
        load(src.row(11)),
        load(src.row(12)),
        load(src.row(13)),
        load(src.row(14)),
        load(src.row(15)),
    ];
    let v = interleave(interleave(interleave(interleave(v))));
    for (i, &v) in v.iter().enumerate() {
        store_half(dst.row(i), _mm256_castsi256_si128(v));
        store_half(dst.row(i + 16), _mm256_extracti128_si256::<1>(v));
    }
}

#[inline]
#[target_feature(enable = "avx2")]
fn interleave(v: [__m256i; 16]) -> [__m256i; 16] {
    // Written out, because arrays that are indexed in a loop end up in memory.
    [
        _mm256_unpacklo_epi8(v[0], v[8]),
        _mm256_unpackhi_epi8(v[0], v[8]),
        _mm256_unpacklo_epi8(v[1], v[9]),
        _mm256_unpackhi_epi8(v[1], v[9]),
        _mm256_unpacklo_epi8(v[2], v[10]),
        _mm256_unpackhi_epi8(v[2], v[10]),
        _mm256_unpacklo_epi8(v[3], v[11]),
        _mm256_unpackhi_epi8(v[3], v[11]),
        _mm256_unpacklo_epi8(v[4], v[12]),
        _mm256_unpackhi_epi8(v[4], v[12]),
        _mm256_unpacklo_epi8(v[5], v[13]),
        _mm256_unpackhi_epi8(v[5], v[13]),
        _mm256_unpacklo_epi8(v[6], v[14]),
        _mm256_unpackhi_epi8(v[6], v[14]),
        _mm256_unpacklo_epi8(v[7], v[15]),
        _mm256_unpackhi_epi8(v[7], v[15]),
    ]
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
