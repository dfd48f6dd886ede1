import type { RandomStream } from '../numerics/generator.ts';
import { type Foresight, foresightOf, type Place } from './foresight.ts';
import type { AllocationPlan } from './ledger.ts';

/** Guesses the next sequence from the slots it has seen and the rule, which is registered. */
export interface Guesser {
  /** How likely it holds each sequence to be the next there, by sequence index. */
  probabilities(place: Place): number[];
  /** A slot was issued there, and it saw which sequence. */
  see(place: Place, sequenceIndex: number): void;
  /** A slot was issued there that it did not see. */
  miss(place: Place): void;
}

interface Imagined {
  foresight: Foresight;
  weight: number;
}

/**
 * A guesser who knows the rule, who arrives where and in which stratum, and the sequences of the
 * slots that it sees; only the secret and the other slots are unknown to it.
 *
 * Where it sees everything it is the best guesser there is: it takes the exact probabilities. Where
 * slots are hidden, it imagines many studies, in each of which hidden slots are drawn as the rule
 * would draw them, and weighs each by how likely it made what was seen: a particle filter, which
 * tends to the exact probabilities as the number imagined grows. What it guesses right can be
 * guessed right by somebody, so its share is attainable and the best guesser's is no smaller.
 *
 * Source: sequential importance resampling, Gordon, Salmond & Smith 1993 (IEE Proceedings F
 * 140:107–113); resampled when the effective number is below half.
 *
 * @param options.imagined how many studies to imagine; 1 is exact when it sees everything
 */
export function createGuesser(
  plan: AllocationPlan,
  options: { readonly imagined: number; readonly stream: RandomStream },
): Guesser {
  const { imagined: count, stream } = options;
  let imagined: Imagined[] = Array.from({ length: count }, () => ({
    foresight: foresightOf(plan),
    weight: 1 / count,
  }));
  return {
    probabilities: (place) => {
      const mixed = new Array<number>(plan.set.sequences.length).fill(0);
      for (const { foresight, weight } of imagined) {
        for (const [index, chance] of foresight.probabilities(place).entries()) {
          mixed[index]! += weight * chance;
        }
      }
      return mixed;
    },
    see: (place, sequenceIndex) => {
      let total = 0;
      for (const one of imagined) {
        one.weight *= one.foresight.probabilities(place)[sequenceIndex] ?? 0;
        one.foresight.record(place, sequenceIndex);
        total += one.weight;
      }
      // When every imagined study is contradicted, what they hold still is the best it has.
      for (const one of imagined) one.weight = total > 0 ? one.weight / total : 1 / count;
      const effective = 1 / imagined.reduce((sum, { weight }) => sum + weight ** 2, 0);
      if (effective < count / 2) imagined = resampled(imagined, stream);
    },
    miss: (place) => {
      for (const { foresight } of imagined) {
        foresight.record(place, drawFrom(foresight.probabilities(place), stream.nextUniform()));
      }
    },
  };
}

/** As many studies, each copied about as often as its weight says: systematic resampling. */
function resampled(imagined: readonly Imagined[], stream: RandomStream): Imagined[] {
  const count = imagined.length;
  const offset = stream.nextUniform();
  const kept: Imagined[] = [];
  let passed = 0;
  for (const { foresight, weight } of imagined) {
    passed += weight * count;
    for (let used = false; kept.length < count && kept.length + offset < passed; used = true) {
      kept.push({ foresight: used ? foresight.copy() : foresight, weight: 1 / count });
    }
  }
  // Rounding can leave the last place empty.
  const last = imagined.at(-1);
  while (kept.length < count && last !== undefined) {
    kept.push({ foresight: last.foresight.copy(), weight: 1 / count });
  }
  return kept;
}

/** The sequence whose stretch of the unit interval holds this point. */
function drawFrom(chances: readonly number[], point: number): number {
  let passed = 0;
  for (const [index, chance] of chances.entries()) {
    passed += chance;
    if (point < passed) return index;
  }
  return chances.findLastIndex((chance) => chance > 0);
}
