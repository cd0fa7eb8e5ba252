//! The definition of every kernel, in plain loops over whole rows.

use super::{Block, Extremum, Job, Rows, RowsMut};

/// See [`super::Level::slide`]. The memory holds the suffix, then the extrema of the blocks, then those of their tails.
pub(super) fn slide(op: Extremum, job: Job, src: Rows, mut dst: RowsMut, mut memory: RowsMut) {
    let (width, cut) = (job.width_px, job.cut);
    let (mut suffix, mut blocks) = memory.split(cut.length);
    let (mut blocks, mut tails) = blocks.split(cut.remembered());
    for block in job.blocks() {
        if block.index == 0 {
            for i in 0..cut.remembered() {
                blocks.row(i, width).fill(op.neutral());
                tails.row(i, width).fill(op.neutral());
            }
        }
        // The oldest block that is remembered gives way to this one.
        let slot = block.index % cut.remembered();
        let last = suffix.row(cut.length - 1, width);
        last.copy_from_slice(tails.row(slot, width));
        for i in (0..cut.remembered()).filter(|&i| i != slot) {
            join(op, last, blocks.row(i, width));
        }
        make_suffix(op, block, src.from(block.back), &mut suffix);
        let (prefix, tail) = (blocks.row(slot, width), tails.row(slot, width));
        yield_rows(
            op,
            block,
            src.from(block.front),
            dst.from(block.out),
            suffix.read(),
            prefix,
        );
        tail.fill(op.neutral());
        for o in (cut.length - cut.tail..cut.length).filter(|&o| o < block.front_rows) {
            join(op, tail, src.from(block.front).row(o, width));
        }
    }
}

/// Row `o` becomes the extremum of rows `o..` of those in which windows begin, and of the common rows, which are in the
/// last row at first.
fn make_suffix(op: Extremum, block: Block, back: Rows, suffix: &mut RowsMut) {
    let (above, below) = block.back_rows;
    for o in (0..block.cut.length).rev() {
        let mut rows = suffix.from(o);
        let (mut this, mut next) = rows.split(1);
        let this = this.row(0, block.width_px);
        if o + 1 < block.cut.length {
            this.copy_from_slice(next.row(0, block.width_px));
        }
        if (above..below).contains(&o) {
            join(op, this, back.row(o - above, block.width_px));
        }
    }
}

/// The running prefix of the block, joined with the suffix. The prefix is left as the extremum of the whole block.
fn yield_rows(
    op: Extremum,
    block: Block,
    front: Rows,
    mut dst: RowsMut,
    suffix: Rows,
    prefix: &mut [u8],
) {
    let (from, to) = block.yields;
    prefix.fill(op.neutral());
    for o in 0..block.cut.length {
        if o < block.front_rows {
            join(op, prefix, front.row(o, block.width_px));
        }
        if (from..to).contains(&o) {
            let out = dst.row(o - from, block.width_px);
            out.copy_from_slice(prefix);
            join(op, out, suffix.row(o, block.width_px));
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
