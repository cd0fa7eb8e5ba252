//! The running extremum for any length of vector, written once and stamped into the file of each instruction set, which
//! supplies `load`, `store` and the names of its instructions.
//!
//! Columns are taken in tiles of up to four vectors, whose running values stay in registers. Every tile has its own part
//! of the suffix buffer, row after row; so the last tile may overlap the one before.

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
        pub(super) fn slide(op: Extremum, job: Job, src: Rows, dst: RowsMut, suffix: RowsMut) {
            if job.width_px < $lane {
                return $narrower(op, job, src, dst, suffix);
            }
            match op {
                Extremum::Least => slide_by::<false>(job, src, dst, suffix),
                Extremum::Greatest => slide_by::<true>(job, src, dst, suffix),
            }
        }

        #[target_feature(enable = $feature)]
        fn slide_by<const MAX: bool>(job: Job, src: Rows, mut dst: RowsMut, suffix: RowsMut) {
            let size = job.span.size();
            let mut rest = &mut *suffix.pixels;
            let mut x = 0;
            while x < job.width_px {
                let step = tile_width(size, job.width_px - x);
                let own = rest.split_off_mut(..step * size);
                let own = own.expect("the suffix has room for every tile");
                let column = x.min(job.width_px - step);
                if step == 4 * $lane {
                    column_of_tiles::<MAX, { 4 * $lane }>(job, column, src, &mut dst, own);
                } else if step == 2 * $lane {
                    column_of_tiles::<MAX, { 2 * $lane }>(job, column, src, &mut dst, own);
                } else {
                    column_of_tiles::<MAX, $lane>(job, column, src, &mut dst, own);
                }
                x += step;
            }
        }

        /// As wide as the picture allows and as lets the source, the output and the suffix of a block stay in the nearest
        /// cache.
        fn tile_width(size: usize, left: usize) -> usize {
            let fitting = (super::NEAREST_CACHE / (3 * size)).max(128);
            match fitting.min(left) / $lane {
                4.. => 4 * $lane,
                2.. => 2 * $lane,
                _ => $lane,
            }
        }

        /// All blocks of the job in `WIDTH` columns from `x` on.
        #[target_feature(enable = $feature)]
        fn column_of_tiles<const MAX: bool, const WIDTH: usize>(
            job: Job,
            x: usize,
            src: Rows,
            dst: &mut RowsMut,
            suffix: &mut [u8],
        ) {
            for block in job.blocks() {
                tile::<MAX, WIDTH>(
                    &block,
                    x,
                    src.from(block.src),
                    &mut dst.from(block.out),
                    suffix,
                );
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

        /// One block of `WIDTH` columns from `x` on.
        #[inline]
        #[target_feature(enable = $feature)]
        fn tile<const MAX: bool, const WIDTH: usize>(
            block: &Block,
            x: usize,
            src: Rows,
            dst: &mut RowsMut,
            suffix: &mut [u8],
        ) {
            let inside = block.rows_in;
            let suffix = &mut suffix.as_chunks_mut().0[..block.size];
            let src = View::new(src, x, inside);
            let dst = ViewMut::new(dst.from(0), x, block.end - block.skip);
            yield_rows::<MAX, WIDTH>(block, src, dst, suffix);
            if block.is_last {
                return;
            }
            let mut backward = neutral::<MAX>();
            for row in &mut suffix[inside..] {
                put(row, &backward);
            }
            for o in (0..inside).rev() {
                backward = join::<MAX, WIDTH>(&backward, src.row(o));
                put(&mut suffix[o], &backward);
            }
        }

        /// The forward half of [`tile`].
        #[inline]
        #[target_feature(enable = $feature)]
        fn yield_rows<const MAX: bool, const WIDTH: usize>(
            block: &Block,
            src: View<WIDTH>,
            mut dst: ViewMut<WIDTH>,
            suffix: &[[u8; WIDTH]],
        ) {
            let Block { skip, end, .. } = *block;
            let inside = block.rows_in;
            // The last row of a block ends a window that lies in this block alone, as do all in the first block.
            let joined = match block.is_first {
                true => skip,
                false => end.min(block.size - 1),
            };
            let mut prefix = neutral::<MAX>();
            for o in 0..skip.min(inside) {
                prefix = join::<MAX, WIDTH>(&prefix, src.row(o));
            }
            for o in skip..joined.min(inside) {
                prefix = join::<MAX, WIDTH>(&prefix, src.row(o));
                let both = join::<MAX, WIDTH>(&prefix, &suffix[o + 1]);
                put(dst.row(o - skip), &both);
            }
            for o in skip.max(inside)..joined {
                let both = join::<MAX, WIDTH>(&prefix, &suffix[o + 1]);
                put(dst.row(o - skip), &both);
            }
            for o in joined..end {
                if o < inside {
                    prefix = join::<MAX, WIDTH>(&prefix, src.row(o));
                }
                put(dst.row(o - skip), &prefix);
            }
        }
    };
}
pub(super) use slide;
