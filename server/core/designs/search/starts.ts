import { assert } from '../../errors.ts';
import type { RandomStream } from '../../numerics/generator.ts';
import type { SequenceDrawer } from './sequence-draw.ts';
import { keepsRules, type SequenceRules } from './sequence-rules.ts';

/** Sequences to begin a cycle of the search with: sequenceCount × p indices, row-major. */
export interface Starts {
  /** Each drawn by itself, with as few repetitions as the rules permit. */
  drawn(): Int32Array;
  /**
   * One drawn sequence for every t, and the t − 1 that come of it by adding 1, 2, … to its
   * condition indices modulo t: each condition equally often in each period. Where such a
   * sequence breaks a rule, one is drawn in its place.
   * Source: Davis & Hall 1969, "Cyclic change-over designs", Biometrika 56:283–293.
   */
  developed(): Int32Array;
}

/** @param drawer of the same rules, which leave at least one sequence */
export function startsOf(
  rules: SequenceRules,
  sequenceCount: number,
  drawer: SequenceDrawer,
  stream: RandomStream,
): Starts {
  const { conditionCount, periods } = rules;
  const fill = (rowOf: (row: number) => Int32Array | null): Int32Array => {
    const sequences = new Int32Array(sequenceCount * periods);
    const used = new Int32Array(conditionCount);
    for (let row = 0; row < sequenceCount; row += 1) {
      const sequence = rowOf(row) ?? drawer.draw(stream, false, used);
      assert(typeof sequence !== 'string', 'rules that passed the check leave a sequence');
      sequences.set(sequence, row * periods);
      for (const condition of sequence) used[condition]! += 1;
    }
    return sequences;
  };
  const developed = (): Int32Array => {
    let generator = new Int32Array(0);
    return fill((row) => {
      const step = row % conditionCount;
      if (step === 0) {
        const drawn = drawer.draw(stream, false);
        assert(typeof drawn !== 'string', 'rules that passed the check leave a sequence');
        generator = Int32Array.from(drawn);
      }
      const sequence = generator.map((condition) => (condition + step) % conditionCount);
      return keepsRules(sequence, rules) ? sequence : null;
    });
  };
  return { drawn: () => fill(() => null), developed };
}
