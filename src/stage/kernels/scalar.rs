//! The definition of every kernel, in plain loops over whole rows.

use super::{Block, Extremum, Job, Rows, RowsMut};

/// See [`super::Level::slide`].
pub(super) fn slide(op: Extremum, job: Job, src: Rows, mut dst: RowsMut, mut suffix: RowsMut) {
    for block in job.blocks() {
        let src = src.from(block.src);
        yield_rows(op, block, src, dst.from(block.out), &mut suffix);
        extend_suffix(op, block, src, &mut suffix);
    }
}

/// The forward half of a block: the running prefix, joined with the previous block's suffix.
fn yield_rows(op: Extremum, block: Block, src: Rows, mut dst: RowsMut, suffix: &mut RowsMut) {
    let width = block.width_px;
    let stride = suffix.stride_px;
    let (suffix, prefix) = suffix.pixels.split_at_mut(block.size * stride);
    let prefix = &mut prefix[..width];
    prefix.fill(op.neutral());
    for o in 0..block.end {
        if o < block.rows_in {
            join(op, prefix, src.row(o, width));
        }
        if o >= block.skip {
            let out = dst.row(o - block.skip, width);
            out.copy_from_slice(prefix);
            if o + 1 < block.size && !block.is_first {
                join(op, out, &suffix[(o + 1) * stride..][..width]);
            }
        }
    }
}

/// The backward half: the suffix that the next block needs.
fn extend_suffix(op: Extremum, block: Block, src: Rows, suffix: &mut RowsMut) {
    let (width, stride) = (block.width_px, suffix.stride_px);
    for o in (0..block.size).rev() {
        let (this, below) = suffix.pixels[o * stride..].split_at_mut(stride);
        let this = &mut this[..width];
        if o + 1 < block.size {
            this.copy_from_slice(&below[..width]);
        } else {
            this.fill(op.neutral());
        }
        if o < block.rows_in {
            join(op, this, src.row(o, width));
        }
    }
}

/// `into[x] = pick(into[x], from[x])`
fn join(op: Extremum, into: &mut [u8], from: &[u8]) {
    match op {
        Extremum::Least => into.iter_mut().zip(from).for_each(|(i, &f)| *i = f.min(*i)),
        Extremum::Greatest => into.iter_mut().zip(from).for_each(|(i, &f)| *i = f.max(*i)),
    }
}

/// See [`super::Level::turn`].
pub(super) fn turn(width: usize, height: usize, src: Rows, dst: RowsMut) {
    turn_part(0..width, 0..height, src, dst);
}

/// [`turn`] for some columns and rows only: what is left over beside whole tiles.
pub(super) fn turn_part(
    columns: std::ops::Range<usize>,
    rows: std::ops::Range<usize>,
    src: Rows,
    dst: RowsMut,
) {
    for y in rows {
        let row = &src.pixels[y * src.stride_px..];
        for x in columns.clone() {
            dst.pixels[x * dst.stride_px + y] = row[x];
        }
    }
}

/// See [`super::Level::subtract`].
pub(super) fn subtract(upper: &[u8], lower: &[u8], out: &mut [u8]) {
    for ((out, &u), &l) in out.iter_mut().zip(upper).zip(lower) {
        *out = u.saturating_sub(l);
    }
}

/// See [`super::Level::mark`].
pub(super) fn mark(row: &[u8], level: u8, bits: &mut [u64]) {
    for (word, pixels) in bits.iter_mut().zip(row.chunks(64)) {
        *word = 0;
        for (i, &p) in pixels.iter().enumerate() {
            *word |= u64::from(p > level) << i;
        }
    }
}

/// See [`super::Level::mark_difference`].
pub(super) fn mark_difference(upper: &[u8], lower: &[u8], level: u8, bits: &mut [u64]) {
    let pairs = upper.chunks(64).zip(lower.chunks(64));
    for (word, (upper, lower)) in bits.iter_mut().zip(pairs) {
        *word = 0;
        for (i, (&u, &l)) in upper.iter().zip(lower).enumerate() {
            *word |= u64::from(u.saturating_sub(l) > level) << i;
        }
    }
}

#[cfg(test)]
mod tests {
    crate::stage::kernels::tests::stamp!("scalar");
}
