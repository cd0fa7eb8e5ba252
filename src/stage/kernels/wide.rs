//! The running extremum for any length of vector, written once and stamped into the file of each instruction set, which
//! supplies `load`, `store` and the names of its instructions.
//!
//! Columns are taken in tiles of up to four vectors, whose running values stay in registers. Every tile has its own part
//! of the memory, row after row; so the last tile may overlap the one before. The suffix is made anew for every block.

/// Makes `slide` (see [`super::Level::slide`]).
macro_rules! slide {
    (
        feature: $feature:literal,
        vector: $vector:ty,
        lane: $lane:literal,
        zero: $zero:expr,
        ones: $ones:expr,
        least: $least:path,
        greatest: $greatest:path,
        narrower: $narrower:path,
    ) => {
        /// See [`super::Level::slide`]. Pictures narrower than a vector go to the level below.
        #[target_feature(enable = $feature)]
        pub(super) fn slide(op: Extremum, job: Job, src: Rows, dst: RowsMut, memory: RowsMut) {
            if job.width_px < $lane {
                return $narrower(op, job, src, dst, memory);
            }
            match op {
                Extremum::Least => slide_by::<false>(job, src, dst, memory),
                Extremum::Greatest => slide_by::<true>(job, src, dst, memory),
            }
        }

        #[target_feature(enable = $feature)]
        fn slide_by<const MAX: bool>(job: Job, src: Rows, mut dst: RowsMut, memory: RowsMut) {
            let Cut { length, .. } = job.cut;
            let (suffix, mut rest) = memory.pixels.split_at_mut(length * memory.stride_px);
            let mut x = 0;
            while x < job.width_px {
                let step = match (job.width_px - x) / $lane {
                    4.. => 4 * $lane,
                    2.. => 2 * $lane,
                    _ => $lane,
                };
                let own = rest.split_off_mut(..step * 2 * job.cut.remembered());
                let own = own.expect("the memory has room for every tile");
                let column = x.min(job.width_px - step);
                if step == 4 * $lane {
                    tiles::<MAX, { 4 * $lane }>(job, column, src, &mut dst, suffix, own);
                } else if step == 2 * $lane {
                    tiles::<MAX, { 2 * $lane }>(job, column, src, &mut dst, suffix, own);
                } else {
                    tiles::<MAX, $lane>(job, column, src, &mut dst, suffix, own);
                }
                x += step;
            }
        }

        /// All blocks of the job in `WIDTH` columns from `x` on.
        #[target_feature(enable = $feature)]
        fn tiles<const MAX: bool, const WIDTH: usize>(
            job: Job,
            x: usize,
            src: Rows,
            dst: &mut RowsMut,
            suffix: &mut [u8],
            memory: &mut [u8],
        ) {
            let suffix = &mut suffix.as_chunks_mut::<WIDTH>().0[..job.cut.length];
            let (blocks, tails) = memory
                .as_chunks_mut::<WIDTH>()
                .0
                .split_at_mut(job.cut.remembered());
            for block in job.blocks() {
                if block.index == 0 {
                    for row in blocks.iter_mut().chain(&mut *tails) {
                        put(row, &neutral::<MAX>());
                    }
                }
                let slot = block.index % blocks.len();
                let mut common = join::<MAX, WIDTH>(&neutral::<MAX>(), &tails[slot]);
                for i in 0..blocks.len() {
                    if i != slot {
                        common = join::<MAX, WIDTH>(&common, &blocks[i]);
                    }
                }
                let (above, below) = block.back_rows;
                let back = View::new(src.from(block.back), x, below - above);
                make_suffix::<MAX, WIDTH>(&block, back, common, suffix);
                let front = View::new(src.from(block.front), x, block.front_rows);
                let (from, to) = block.yields;
                let dst = ViewMut::new(dst.from(block.out), x, to - from);
                put(
                    &mut blocks[slot],
                    &yield_rows::<MAX, WIDTH>(&block, front, dst, suffix),
                );
                put(&mut tails[slot], &tail_of::<MAX, WIDTH>(&block, front));
            }
        }

        /// The running values of a tile's columns; tiles narrower than four vectors leave some unused.
        type Values = [$vector; 4];

        #[inline]
        #[target_feature(enable = $feature)]
        fn neutral<const MAX: bool>() -> Values {
            [if MAX { $zero } else { $ones }; 4]
        }

        #[inline]
        #[target_feature(enable = $feature)]
        fn join<const MAX: bool, const WIDTH: usize>(values: &Values, row: &[u8; WIDTH]) -> Values {
            let mut joined = *values;
            for (value, bytes) in joined.iter_mut().zip(row.as_chunks().0) {
                *value = match MAX {
                    true => $greatest(*value, load(bytes)),
                    false => $least(*value, load(bytes)),
                };
            }
            joined
        }

        #[inline]
        #[target_feature(enable = $feature)]
        fn put<const WIDTH: usize>(row: &mut [u8; WIDTH], values: &Values) {
            for (bytes, &value) in row.as_chunks_mut().0.iter_mut().zip(values) {
                store(bytes, value);
            }
        }

        /// Row `o` becomes the extremum of rows `o..` of those in which windows begin, and of the common rows.
        #[inline]
        #[target_feature(enable = $feature)]
        fn make_suffix<const MAX: bool, const WIDTH: usize>(
            block: &Block,
            back: View<WIDTH>,
            common: Values,
            suffix: &mut [[u8; WIDTH]],
        ) {
            let (above, below) = block.back_rows;
            let mut values = common;
            for row in &mut suffix[below..] {
                put(row, &values);
            }
            for o in (above..below).rev() {
                values = join::<MAX, WIDTH>(&values, back.row(o - above));
                put(&mut suffix[o], &values);
            }
            for row in &mut suffix[..above] {
                put(row, &values);
            }
        }

        /// The running prefix of the block, joined with the suffix. Gives the extremum of the whole block.
        #[inline]
        #[target_feature(enable = $feature)]
        fn yield_rows<const MAX: bool, const WIDTH: usize>(
            block: &Block,
            front: View<WIDTH>,
            mut dst: ViewMut<WIDTH>,
            suffix: &[[u8; WIDTH]],
        ) -> Values {
            let ((from, to), inside) = (block.yields, block.front_rows);
            let mut prefix = neutral::<MAX>();
            for o in 0..from.min(inside) {
                prefix = join::<MAX, WIDTH>(&prefix, front.row(o));
            }
            for o in from..to.min(inside) {
                prefix = join::<MAX, WIDTH>(&prefix, front.row(o));
                put(dst.row(o - from), &join::<MAX, WIDTH>(&prefix, &suffix[o]));
            }
            for o in from.max(inside)..to {
                put(dst.row(o - from), &join::<MAX, WIDTH>(&prefix, &suffix[o]));
            }
            prefix
        }

        /// The extremum of the last rows of the block.
        #[inline]
        #[target_feature(enable = $feature)]
        fn tail_of<const MAX: bool, const WIDTH: usize>(
            block: &Block,
            front: View<WIDTH>,
        ) -> Values {
            let mut tail = neutral::<MAX>();
            for o in block.cut.length - block.cut.tail..block.front_rows {
                tail = join::<MAX, WIDTH>(&tail, front.row(o));
            }
            tail
        }
    };
}
pub(super) use slide;
