//! The kernels with 64-byte vectors (AVX-512 F and BW). What is narrower than a vector goes to the level below.
#![allow(unsafe_code)]

use std::arch::x86_64::*;

use super::view::{View, ViewMut};
use super::{Block, Cut, Extremum, Job, Rows, RowsMut, avx2, scalar};

/// Bytes of a vector.
const LANE: usize = 64;

#[inline]
#[target_feature(enable = "avx512f,avx512bw")]
fn load(bytes: &[u8; LANE]) -> __m512i {
    // SAFETY: the reference is to 64 readable bytes, and the load asks for no alignment.
    unsafe { _mm512_loadu_si512(bytes.as_ptr().cast()) }
}

#[inline]
#[target_feature(enable = "avx512f,avx512bw")]
fn store(bytes: &mut [u8; LANE], vector: __m512i) {
    // SAFETY: the reference is to 64 writable bytes, and the store asks for no alignment.
    unsafe { _mm512_storeu_si512(bytes.as_mut_ptr().cast(), vector) }
}

#[inline]
#[target_feature(enable = "avx512f,avx512bw")]
fn load_quarter(bytes: &[u8; 16]) -> __m128i {
    // SAFETY: the reference is to 16 readable bytes, and the load asks for no alignment.
    unsafe { _mm_loadu_si128(bytes.as_ptr().cast()) }
}

super::wide::slide! {
    feature: "avx512f,avx512bw",
    vector: __m512i,
    lane: 64,
    zero: _mm512_setzero_si512(),
    ones: _mm512_set1_epi8(-1),
    least: _mm512_min_epu8,
    greatest: _mm512_max_epu8,
    narrower: avx2::slide,
}

/// Columns and rows of a piece that is turned in registers.
const PIECE: (usize, usize) = (16, 64);

/// See [`super::Level::turn`].
#[target_feature(enable = "avx2,avx512f,avx512bw")]
pub(super) fn turn(width: usize, height: usize, src: Rows, mut dst: RowsMut) {
    if width < PIECE.0 || height < PIECE.1 {
        return avx2::turn(width, height, src, dst);
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

/// 64 rows of 16 columns: four squares side by side in the quarters of the vectors. Interleaving the bytes of vector `i`
/// with those of vector `i + 8` moves every address bit up by one (with rotation) within each quarter; four times that
/// swaps rows and columns.
#[inline]
#[target_feature(enable = "avx512f,avx512bw")]
fn turn_piece(x: usize, y: usize, src: Rows, dst: &mut RowsMut) {
    let src = View::<16>::new(src, y * src.stride_px + x, 64);
    let start = x * dst.stride_px + y;
    let mut dst = ViewMut::<LANE>::new(dst.from(0), start, 16);
    let quarters = |i| {
        let v = _mm512_castsi128_si512(load_quarter(src.row(i)));
        let v = _mm512_inserti32x4::<1>(v, load_quarter(src.row(16 + i)));
        let v = _mm512_inserti32x4::<2>(v, load_quarter(src.row(32 + i)));
        _mm512_inserti32x4::<3>(v, load_quarter(src.row(48 + i)))
    };
    let v = [
        quarters(0),
        quarters(1),
        quarters(2),
        quarters(3),
        quarters(4),
        quarters(5),
        quarters(6),
        quarters(7),
        quarters(8),
        quarters(9),
        quarters(10),
        quarters(11),
        quarters(12),
        quarters(13),
        quarters(14),
        quarters(15),
    ];
    let v = interleave(interleave(interleave(interleave(v))));
    for (i, &v) in v.iter().enumerate() {
        store(dst.row(i), v);
    }
}

#[inline]
#[target_feature(enable = "avx512f,avx512bw")]
fn interleave(v: [__m512i; 16]) -> [__m512i; 16] {
    // Written out, because arrays that are indexed in a loop end up in memory.
    [
        _mm512_unpacklo_epi8(v[0], v[8]),
        _mm512_unpackhi_epi8(v[0], v[8]),
        _mm512_unpacklo_epi8(v[1], v[9]),
        _mm512_unpackhi_epi8(v[1], v[9]),
        _mm512_unpacklo_epi8(v[2], v[10]),
        _mm512_unpackhi_epi8(v[2], v[10]),
        _mm512_unpacklo_epi8(v[3], v[11]),
        _mm512_unpackhi_epi8(v[3], v[11]),
        _mm512_unpacklo_epi8(v[4], v[12]),
        _mm512_unpackhi_epi8(v[4], v[12]),
        _mm512_unpacklo_epi8(v[5], v[13]),
        _mm512_unpackhi_epi8(v[5], v[13]),
        _mm512_unpacklo_epi8(v[6], v[14]),
        _mm512_unpackhi_epi8(v[6], v[14]),
        _mm512_unpacklo_epi8(v[7], v[15]),
        _mm512_unpackhi_epi8(v[7], v[15]),
    ]
}

/// See [`super::Level::subtract`].
#[target_feature(enable = "avx512f,avx512bw")]
pub(super) fn subtract(upper: &[u8], lower: &[u8], out: &mut [u8]) {
    let ((u, u_rest), (l, l_rest)) = (upper.as_chunks(), lower.as_chunks());
    let (o, o_rest) = out.as_chunks_mut();
    for ((o, u), l) in o.iter_mut().zip(u).zip(l) {
        store(o, _mm512_subs_epu8(load(u), load(l)));
    }
    scalar::subtract(u_rest, l_rest, o_rest);
}

/// See [`super::Level::mark`].
#[target_feature(enable = "avx512f,avx512bw")]
pub(super) fn mark(row: &[u8], level: u8, bits: &mut [u64]) {
    let (words, rest) = row.as_chunks();
    let (whole, last) = bits.split_at_mut(words.len());
    let level_everywhere = _mm512_set1_epi8(level as i8);
    for (bits, word) in whole.iter_mut().zip(words) {
        *bits = _mm512_cmpgt_epu8_mask(load(word), level_everywhere);
    }
    scalar::mark(rest, level, last);
}

/// See [`super::Level::mark_difference`].
#[target_feature(enable = "avx512f,avx512bw")]
pub(super) fn mark_difference(upper: &[u8], lower: &[u8], level: u8, bits: &mut [u64]) {
    let ((u, u_rest), (l, l_rest)) = (upper.as_chunks(), lower.as_chunks());
    let (whole, last) = bits.split_at_mut(u.len());
    let level_everywhere = _mm512_set1_epi8(level as i8);
    for ((bits, u), l) in whole.iter_mut().zip(u).zip(l) {
        let difference = _mm512_subs_epu8(load(u), load(l));
        *bits = _mm512_cmpgt_epu8_mask(difference, level_everywhere);
    }
    scalar::mark_difference(u_rest, l_rest, level, last);
}

#[cfg(test)]
mod tests {
    crate::stage::kernels::tests::stamp!("avx512");
}
