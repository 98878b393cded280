//! Tiles of rows turned into columns and back.

/// Entries of a cache line; rows and columns of a tile.
pub const LINE: usize = 8;

/// Eight lines of eight entries turned: entry `i` of line `j` becomes entry `j` of line `i`, which
/// `write(i, line)` receives.
#[inline(always)]
fn turn_plain(lines: [&[f64; LINE]; LINE], write: &mut impl FnMut(usize, [f64; LINE])) {
    for entry in 0..LINE {
        write(entry, lines.map(|line| line[entry]));
    }
}

/// Turns `rows`, of equal length, into columns that begin `distance` apart in `columns`; only whole
/// tiles for which there is room. Returns the number of columns done.
pub fn rows_to_columns(rows: [&[f64]; LINE], columns: &mut [f64], distance: usize) -> usize {
    #[cfg(target_arch = "x86_64")]
    if is_x86_feature_detected!("avx") {
        // SAFETY: the feature that the function is compiled for was found just above.
        return unsafe { x86::rows_to_columns(rows, columns, distance) };
    }
    let tiles = rows.map(|row| row.as_chunks::<LINE>().0);
    let count = tiles.map(<[_]>::len).into_iter().min().unwrap_or(0);
    for tile in 0..count {
        let mut write = |entry: usize, line: [f64; LINE]| {
            put(columns, (tile * LINE + entry) * distance, line);
        };
        turn_plain(tiles.map(|row| &row[tile]), &mut write);
    }
    count * LINE
}

/// Turns columns that begin `distance` apart in `columns`, as many as a row is long but whole tiles
/// only, into `rows`, of equal length. Returns the number of columns done.
pub fn columns_to_rows(columns: &[f64], distance: usize, rows: [&mut [f64]; LINE]) -> usize {
    #[cfg(target_arch = "x86_64")]
    if is_x86_feature_detected!("avx") {
        // SAFETY: the feature that the function is compiled for was found just above.
        return unsafe { x86::columns_to_rows(columns, distance, rows) };
    }
    let mut tiles = rows.map(|row| row.as_chunks_mut::<LINE>().0);
    let count = tiles.each_ref().map(|row| row.len());
    let count = count.into_iter().min().unwrap_or(0);
    for tile in 0..count {
        let Some(lines) = lines_of(columns, distance, tile) else {
            return tile * LINE;
        };
        turn_plain(lines, &mut |row, line| {
            if let Some(target) = tiles[row].get_mut(tile) {
                *target = line;
            }
        });
    }
    count * LINE
}

#[inline(always)]
fn put(columns: &mut [f64], start: usize, line: [f64; LINE]) {
    if let Some(target) = columns
        .get_mut(start..)
        .and_then(|rest| rest.first_chunk_mut::<LINE>())
    {
        *target = line;
    }
}

/// The lines of a tile of columns; nothing where they are not all there.
#[inline(always)]
fn lines_of(columns: &[f64], distance: usize, tile: usize) -> Option<[&[f64; LINE]; LINE]> {
    let mut lines = [&[0.0; LINE]; LINE];
    for (column, line) in lines.iter_mut().enumerate() {
        *line = columns
            .get((tile * LINE + column) * distance..)?
            .first_chunk()?;
    }
    Some(lines)
}

#[cfg(target_arch = "x86_64")]
mod x86 {
    use super::{LINE, lines_of, put};
    use std::arch::x86_64::{
        __m256d, _mm_loadu_pd, _mm256_castpd128_pd256, _mm256_insertf128_pd, _mm256_storeu_pd,
        _mm256_unpackhi_pd, _mm256_unpacklo_pd,
    };

    #[target_feature(enable = "avx")]
    pub(super) fn rows_to_columns(
        rows: [&[f64]; LINE],
        columns: &mut [f64],
        distance: usize,
    ) -> usize {
        let tiles = rows.map(|row| row.as_chunks::<LINE>().0);
        let count = tiles.map(<[_]>::len).into_iter().min().unwrap_or(0);
        for tile in 0..count {
            let lines = tiles.map(|row| &row[tile]);
            for pair in 0..LINE / 2 {
                let [even, odd] = turned_pair(lines, pair);
                let start = (tile * LINE + 2 * pair) * distance;
                put(columns, start, even);
                put(columns, start + distance, odd);
            }
        }
        count * LINE
    }

    #[target_feature(enable = "avx")]
    pub(super) fn columns_to_rows(
        columns: &[f64],
        distance: usize,
        rows: [&mut [f64]; LINE],
    ) -> usize {
        let tiles = rows.map(|row| row.as_chunks_mut::<LINE>().0);
        let count = tiles.each_ref().map(|row| row.len());
        let count = count.into_iter().min().unwrap_or(0);
        for tile in 0..count {
            let Some(lines) = lines_of(columns, distance, tile) else {
                return tile * LINE;
            };
            for pair in 0..LINE / 2 {
                let [even, odd] = turned_pair(lines, pair);
                for (row, line) in [(2 * pair, even), (2 * pair + 1, odd)] {
                    if let Some(target) = tiles[row].get_mut(tile) {
                        *target = line;
                    }
                }
            }
        }
        count * LINE
    }

    /// Entries `2·pair` and `2·pair + 1` of every line.
    #[inline]
    #[target_feature(enable = "avx")]
    fn turned_pair(lines: [&[f64; LINE]; LINE], pair: usize) -> [[f64; LINE]; 2] {
        let mut turned = [[0.0; LINE]; 2];
        for half in 0..2 {
            let first = halves(lines[4 * half], lines[4 * half + 2], pair);
            let second = halves(lines[4 * half + 1], lines[4 * half + 3], pair);
            let even = _mm256_unpacklo_pd(first, second);
            let odd = _mm256_unpackhi_pd(first, second);
            // SAFETY: four entries from 4·half on exist in an array of eight.
            unsafe {
                _mm256_storeu_pd(turned[0].as_mut_ptr().add(4 * half), even);
                _mm256_storeu_pd(turned[1].as_mut_ptr().add(4 * half), odd);
            }
        }
        turned
    }

    /// Two entries of one line and two of the other.
    #[inline]
    #[target_feature(enable = "avx")]
    fn halves(low: &[f64; LINE], high: &[f64; LINE], pair: usize) -> __m256d {
        let pair = 2 * pair.min(LINE / 2 - 1);
        // SAFETY: entries `pair` and `pair + 1` exist in arrays of eight by the bound above.
        unsafe {
            let low = _mm_loadu_pd(low.as_ptr().add(pair));
            let high = _mm_loadu_pd(high.as_ptr().add(pair));
            _mm256_insertf128_pd::<1>(_mm256_castpd128_pd256(low), high)
        }
    }
}
