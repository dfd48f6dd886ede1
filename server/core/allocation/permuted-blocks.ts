import { assert, DomainError } from '../errors.ts';
import { type Draw, uniformBelow } from './keyed-draw.ts';

/** The blocks of a cell that are complete: how many, and how often each sequence stands in them. */
export interface CompleteBlocks {
  readonly blocks: number;
  readonly perSequence: number;
}

export const NO_BLOCKS: CompleteBlocks = { blocks: 0, perSequence: 0 };

/** The block of a cell that the next slot belongs to. */
export interface OpenBlock {
  /** Every sequence stands so often in this block. */
  readonly multiple: number;
  /** How often each sequence is still to be handed out in it; at least one of them is not 0. */
  readonly remaining: Int32Array;
  readonly complete: CompleteBlocks;
}

/**
 * The block that the next slot of a cell belongs to, under *permuted blocks* of random size.
 *
 * A block holds every sequence equally often: one of `multiples`, each equally likely, drawn by the
 * block's own generator. The generator is the block's and not that of its first slot, so that the
 * sizes follow from the number of the block: the counts of a cell then tell where in which block it
 * stands, and nothing has to be stored beside them. Costs one draw a block.
 *
 * @param input.cell      issued slots by sequence index; not modified
 * @param input.multiples whole numbers from 1, at least one
 * @param input.complete  blocks that are known to be complete; saves drawing their sizes again
 * @param input.drawOf    the generator of a block's size, by its number from 1
 * @throws {DomainError} when the counts are none that such blocks can give, or a list is empty
 */
export function openBlock(input: {
  readonly cell: Int32Array;
  readonly multiples: readonly number[];
  readonly complete?: CompleteBlocks;
  readonly drawOf: (blockNumber: number) => Draw;
}): OpenBlock {
  const { cell, multiples, complete: known = NO_BLOCKS, drawOf } = input;
  if (cell.length === 0) throw new DomainError('There are no sequences to hand out');
  const issued = cell.reduce((sum, count) => sum + count, 0);
  let { blocks, perSequence } = known;
  // Each block holds a slot at least, so there are no more complete blocks than slots.
  while (blocks <= issued) {
    const { value } = uniformBelow(multiples.length, drawOf(blocks + 1));
    const multiple = multiples[value] ?? 0;
    const afterBlock = perSequence + multiple;
    if (issued < afterBlock * cell.length) {
      const remaining = cell.map((count) => afterBlock - count);
      if (remaining.some((count) => count < 0 || count > multiple)) {
        throw new DomainError(`Blocks cannot give the counts ${Array.from(cell).join(', ')}`);
      }
      return { multiple, remaining, complete: { blocks, perSequence } };
    }
    blocks += 1;
    perSequence = afterBlock;
  }
  assert(false, 'a cell has at most as many complete blocks as slots');
}

/**
 * The policy *permuted blocks*: which sequence the next slot of a cell carries. Every slot that the
 * open block has left is equally likely, which makes every order of the block equally likely.
 *
 * What holds, whatever the order of arrivals, with m the largest of the multiples:
 * - Cell: counts by sequence never differ by more than m. Proof: complete blocks give every
 *   sequence equally often; in the open one each has been handed out 0 to m times. The bound is
 *   reached whenever one sequence happens to come m times before another comes at all. After each
 *   complete block the counts are equal.
 * - Margins: by at most m times the number of cells that make them up (adding up the bounds of the
 *   cells): S strata at a site, K sites in a stratum, K · S cells in the study. Cells know nothing
 *   of one another here, so margins are looser than under *balanced*.
 *
 * Source: permuted blocks within strata, Zelen 1974 (Journal of Chronic Diseases 27:365–375); that
 * their size is drawn is common practice. The bounds follow as above.
 *
 * @param block what `openBlock` gives
 * @param draw  the slot's generator, see `slotDraw`
 * @returns the sequence index, and how many draws of the slot were used
 */
export function nextInBlock(
  block: OpenBlock,
  draw: Draw,
): { sequenceIndex: number; drawsUsed: number } {
  const left = block.remaining.reduce((sum, count) => sum + count, 0);
  const { value, drawsUsed } = uniformBelow(left, draw);
  let passed = 0;
  for (const [sequenceIndex, count] of block.remaining.entries()) {
    passed += count;
    if (value < passed) return { sequenceIndex, drawsUsed };
  }
  assert(false, 'a number below what is left of a block points at one of its sequences');
}
