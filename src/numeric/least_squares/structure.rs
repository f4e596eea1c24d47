//! Which residuals depend on which parameters: a joint fit's Jacobian is mostly zeros, and neither
//! stored nor multiplied where it is.

use super::MAX_PARAMETERS;

/// Most blocks of a structure.
pub const MAX_BLOCKS: usize = 4;

/// Consecutive residuals that depend on the same parameters.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct RowBlock {
    rows: usize,
    parameters: [usize; MAX_PARAMETERS],
    count: usize,
}

impl RowBlock {
    /// `rows` residuals that depend on the given parameters (positions, in any order, each once).
    ///
    /// # Panics
    ///
    /// Where there are more than [`MAX_PARAMETERS`] of them.
    #[must_use]
    pub fn new(rows: usize, parameters: &[usize]) -> Self {
        let mut block = Self {
            rows,
            parameters: [0; MAX_PARAMETERS],
            count: parameters.len(),
        };
        block.parameters[..parameters.len()].copy_from_slice(parameters);
        block
    }

    const EMPTY: Self = Self {
        rows: 0,
        parameters: [0; MAX_PARAMETERS],
        count: 0,
    };

    /// Number of residuals.
    #[must_use]
    pub fn rows(&self) -> usize {
        self.rows
    }

    /// The parameters, in the order of the block's columns.
    #[must_use]
    pub fn parameters(&self) -> &[usize] {
        &self.parameters[..self.count]
    }

    fn numbers(&self) -> usize {
        self.rows * self.count
    }
}

/// The blocks of a Jacobian, in the order of the residuals.
///
/// A Jacobian is stored block by block, each column by column: the derivative of a block's residual i
/// by its parameter k stands at `start of the block + k * rows + i`.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Structure {
    blocks: [RowBlock; MAX_BLOCKS],
    count: usize,
}

impl Structure {
    /// Every residual depends on every parameter.
    ///
    /// # Panics
    ///
    /// Where there are more than [`MAX_PARAMETERS`] of them.
    #[must_use]
    pub fn dense(rows: usize, parameters: usize) -> Self {
        let all: [usize; MAX_PARAMETERS] = std::array::from_fn(|index| index);
        Self::new(&[RowBlock::new(rows, &all[..parameters])])
    }

    /// The given blocks.
    ///
    /// # Panics
    ///
    /// Where there are more than [`MAX_BLOCKS`].
    #[must_use]
    pub fn new(blocks: &[RowBlock]) -> Self {
        let mut structure = Self {
            blocks: [RowBlock::EMPTY; MAX_BLOCKS],
            count: blocks.len(),
        };
        structure.blocks[..blocks.len()].copy_from_slice(blocks);
        structure
    }

    /// The blocks.
    #[must_use]
    pub fn blocks(&self) -> &[RowBlock] {
        &self.blocks[..self.count]
    }

    /// Number of residuals.
    #[must_use]
    pub fn rows(&self) -> usize {
        self.blocks().iter().map(RowBlock::rows).sum()
    }

    /// Numbers that a Jacobian stores.
    #[must_use]
    pub fn numbers(&self) -> usize {
        self.blocks().iter().map(RowBlock::numbers).sum()
    }

    /// The residual and the parameter of a stored number.
    pub(super) fn place(&self, mut index: usize) -> (usize, usize) {
        let mut first = 0;
        for block in self.blocks() {
            if index < block.numbers() {
                return (
                    first + index % block.rows,
                    block.parameters()[index / block.rows],
                );
            }
            index -= block.numbers();
            first += block.rows;
        }
        (first, 0)
    }

    /// Each block with its part of a stored Jacobian and of the residuals.
    pub(super) fn parts<'a>(
        &'a self,
        mut jacobian: &'a [f64],
        mut residuals: &'a [f64],
    ) -> impl Iterator<Item = (&'a RowBlock, &'a [f64], &'a [f64])> {
        self.blocks().iter().map(move |block| {
            let (own, rest) = jacobian.split_at(block.numbers());
            jacobian = rest;
            let (rows, rest) = residuals.split_at(block.rows);
            residuals = rest;
            (block, own, rows)
        })
    }

    /// Writes a stored Jacobian out, column by column with its zeros, into `dense` (all residuals
    /// times `columns`).
    pub(super) fn expand(&self, stored: &[f64], columns: usize, dense: &mut [f64]) {
        let rows = self.rows();
        dense[..rows * columns].fill(0.0);
        let mut start = 0;
        let mut first = 0;
        for block in self.blocks() {
            for parameter in block.parameters() {
                let target = parameter * rows + first;
                dense[target..target + block.rows]
                    .copy_from_slice(&stored[start..start + block.rows]);
                start += block.rows;
            }
            first += block.rows;
        }
    }
}
