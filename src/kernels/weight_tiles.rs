//! The sums of [`super::weight_sums`] over a block of rows: of one contiguous column, and of many
//! columns whose rows are contiguous. Both add in the same order.

use super::entry::Entry;
use super::vector::exp::exp;
use super::vector::{Arithmetic, Work};
use super::weight_sums::{Sums, distance, form, larger, shift};

/// Rows of a chunk, and columns of a tile.
const CHUNK: usize = 64;

/// Groups of a chunk, and rows of a group.
const GROUP: usize = 8;

#[inline(always)]
fn tree(t: [f64; GROUP]) -> f64 {
    ((t[0] + t[4]) + (t[2] + t[6])) + ((t[1] + t[5]) + (t[3] + t[7]))
}

/// The three terms of one draw at distance `d` from the maximum.
#[inline(always)]
fn terms<A: Arithmetic, const FORM: u8>(d: f64) -> (f64, f64, f64) {
    let r = exp::<A>(d);
    let squares = if FORM & form::SQUARES != 0 {
        r * r
    } else {
        0.0
    };
    let spread = if FORM & form::SPREAD != 0 {
        r * larger(d, -1000.0)
    } else {
        0.0
    };
    (r, squares, spread)
}

/// The sums of one block of a contiguous column, at most 4096 rows.
pub struct ColumnSums<'a, E, const FORM: u8>(pub &'a [E]);

impl<E: Entry, const FORM: u8> Work for ColumnSums<'_, E, FORM> {
    type Output = Sums;

    #[inline(always)]
    fn run<A: Arithmetic>(self) -> Sums {
        let mut sums = Sums::NONE;
        let (chunks, rest) = self.0.as_chunks::<CHUNK>();
        let mut x = [0.0; CHUNK];
        for chunk in chunks {
            for (wide, entry) in x.iter_mut().zip(chunk) {
                *wide = entry.wide();
            }
            add_chunk::<A, FORM>(&x, &mut sums);
        }
        if !rest.is_empty() {
            x = [f64::NEG_INFINITY; CHUNK];
            for (wide, entry) in x.iter_mut().zip(rest) {
                *wide = entry.wide();
            }
            add_chunk::<A, FORM>(&x, &mut sums);
        }
        sums
    }
}

#[inline(always)]
fn add_chunk<A: Arithmetic, const FORM: u8>(x: &[f64; CHUNK], sums: &mut Sums) {
    let mut maxima = trees(x, larger);
    let [a, b, c, d, e, f, g, h] = maxima;
    let top = larger(
        larger(larger(a, b), larger(c, d)),
        larger(larger(e, f), larger(g, h)),
    );
    let rises = top > sums.maximum;
    let mut shifts = [shift(sums.maximum); GROUP];
    // Few chunks hold a new maximum, and the others need not wait for the one before.
    if rises {
        let mut maximum = sums.maximum;
        for top in &mut maxima {
            maximum = larger(*top, maximum);
            *top = maximum;
        }
        shifts = maxima.map(shift);
    }
    let mut d = [0.0; CHUNK];
    for (d, x) in d.as_chunks_mut().0.iter_mut().zip(x.as_chunks().0) {
        *d = distances(x, &shifts);
    }
    let mut r = [0.0; CHUNK];
    for (r, &d) in r.iter_mut().zip(&d) {
        *r = exp::<A>(d);
    }
    let (mut squares, mut spreads) = ([0.0; GROUP], [0.0; GROUP]);
    let mut term = [0.0; CHUNK];
    if FORM & form::SQUARES != 0 {
        for (term, r) in term.iter_mut().zip(&r) {
            *term = r * r;
        }
        squares = trees(&term, |a, b| a + b);
    }
    if FORM & form::SPREAD != 0 {
        for ((term, r), &d) in term.iter_mut().zip(&r).zip(&d) {
            *term = r * larger(d, -1000.0);
        }
        spreads = trees(&term, |a, b| a + b);
    }
    for (group, total) in trees(&r, |a, b| a + b).into_iter().enumerate() {
        if rises && maxima[group] > sums.maximum {
            raise::<A>(sums, maxima[group]);
        }
        sums.total += total;
        sums.squares += squares[group];
        sums.spread += spreads[group];
    }
}

#[inline(always)]
fn distances(x: &[f64; GROUP], shifts: &[f64; GROUP]) -> [f64; GROUP] {
    std::array::from_fn(|group| x[group] - shifts[group])
}

/// The tree of each group of a chunk, by halves: loops that become vector code.
#[inline(always)]
fn trees(t: &[f64; CHUNK], join: impl Fn(f64, f64) -> f64) -> [f64; GROUP] {
    let (mut four, mut two, mut one) = ([0.0; 4 * GROUP], [0.0; 2 * GROUP], [0.0; GROUP]);
    for i in 0..4 * GROUP {
        four[i] = join(t[i], t[i + 4 * GROUP]);
    }
    for i in 0..2 * GROUP {
        two[i] = join(four[i], four[i + 2 * GROUP]);
    }
    for i in 0..GROUP {
        one[i] = join(two[i], two[i + GROUP]);
    }
    one
}

#[inline(always)]
fn raise<A: Arithmetic>(sums: &mut Sums, top: f64) {
    let new = larger(top, sums.maximum);
    let distance = distance(sums.maximum, new);
    let factor = exp::<A>(distance);
    sums.maximum = new;
    sums.spread = factor * A::mul_add(distance, sums.total, sums.spread);
    sums.total *= factor;
    sums.squares *= factor * factor;
}

/// Adds rows to the sums of as many columns: `rows` are at most 4096 rows of equal length,
/// `sums` holds that many entries, and the sums start from [`Sums::NONE`].
pub struct TileSums<'a, E, const FORM: u8> {
    /// The rows in order.
    pub rows: &'a [&'a [E]],
    /// As many entries `−inf` as a row has.
    pub none: &'a [E],
    /// The sums of every column.
    pub state: &'a mut State,
}

/// Sums of many columns, one array a sum.
pub struct State {
    maximum: Vec<f64>,
    total: Vec<f64>,
    squares: Vec<f64>,
    spread: Vec<f64>,
}

impl State {
    /// The sums of `columns` columns without a draw.
    pub fn new(columns: usize) -> Self {
        let padded = columns.next_multiple_of(CHUNK);
        Self {
            maximum: vec![f64::NEG_INFINITY; padded],
            total: vec![0.0; padded],
            squares: vec![0.0; padded],
            spread: vec![0.0; padded],
        }
    }

    /// The sums of one column.
    pub fn column(&self, index: usize) -> Sums {
        Sums {
            maximum: self.maximum[index],
            total: self.total[index],
            squares: self.squares[index],
            spread: self.spread[index],
        }
    }
}

impl<E: Entry, const FORM: u8> Work for TileSums<'_, E, FORM> {
    type Output = ();

    #[inline(always)]
    fn run<A: Arithmetic>(self) {
        for chunk in self.rows.chunks(CHUNK) {
            for group in 0..GROUP.min(chunk.len()) {
                let rows: [&[E]; GROUP] = std::array::from_fn(|row| {
                    chunk.get(GROUP * row + group).map_or(self.none, |row| *row)
                });
                add_rows::<A, E, FORM>(rows, self.state);
            }
        }
    }
}

#[inline(always)]
fn add_rows<A: Arithmetic, E: Entry, const FORM: u8>(rows: [&[E]; GROUP], state: &mut State) {
    let tiles = rows.map(|row| row.as_chunks::<CHUNK>());
    let maxima = state.maximum.as_chunks_mut::<CHUNK>().0;
    let totals = state.total.as_chunks_mut::<CHUNK>().0;
    let squares = state.squares.as_chunks_mut::<CHUNK>().0;
    let spreads = state.spread.as_chunks_mut::<CHUNK>().0;
    let states = maxima.iter_mut().zip(totals).zip(squares).zip(spreads);
    for (index, (((maximum, total), square), spread)) in states.enumerate() {
        if tiles.iter().all(|tile| index < tile.0.len()) {
            let tile = tiles.map(|tile| &tile.0[index]);
            add_tile::<A, E, FORM>(tile, maximum, total, square, spread);
        } else {
            let padded = tiles.map(|tile| {
                let mut entries = [E::NONE; CHUNK];
                entries[..tile.1.len()].copy_from_slice(tile.1);
                entries
            });
            add_tile::<A, E, FORM>(padded.each_ref(), maximum, total, square, spread);
        }
    }
}

#[inline(always)]
fn add_tile<A: Arithmetic, E: Entry, const FORM: u8>(
    rows: [&[E; CHUNK]; GROUP],
    maximum: &mut [f64; CHUNK],
    total: &mut [f64; CHUNK],
    squares: &mut [f64; CHUNK],
    spread: &mut [f64; CHUNK],
) {
    let mut tops = [0.0; CHUNK];
    let mut rises = false;
    for c in 0..CHUNK {
        let mut top = maximum[c];
        for row in rows {
            top = larger(row[c].wide(), top);
        }
        tops[c] = top;
        rises |= top > maximum[c];
    }
    if rises {
        for c in 0..CHUNK {
            let distance = distance(maximum[c], tops[c]);
            let factor = exp::<A>(distance);
            maximum[c] = tops[c];
            spread[c] = factor * A::mul_add(distance, total[c], spread[c]);
            total[c] *= factor;
            squares[c] *= factor * factor;
        }
    }
    for c in 0..CHUNK {
        let shift = shift(maximum[c]);
        let (mut r, mut q, mut t) = ([0.0; GROUP], [0.0; GROUP], [0.0; GROUP]);
        for row in 0..GROUP {
            (r[row], q[row], t[row]) = terms::<A, FORM>(rows[row][c].wide() - shift);
        }
        total[c] += tree(r);
        if FORM & form::SQUARES != 0 {
            squares[c] += tree(q);
        }
        if FORM & form::SPREAD != 0 {
            spread[c] += tree(t);
        }
    }
}
