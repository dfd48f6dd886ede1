import type { TrialPlace } from './store-trials.ts';
import type { TrialRules } from './trial-rules.ts';

/** Which of the planned records of some participants are stored: a number each, no content. */
export class PresentTrials {
  readonly #present = new Map<string, Set<number>>();

  /** Whether a participant's stored records have been added yet. */
  knows(participantId: string): boolean {
    return this.#present.has(participantId);
  }

  addParticipant(participantId: string): void {
    this.#present.set(participantId, new Set());
  }

  has(place: TrialPlace, rules: TrialRules): boolean {
    return this.#placesOf(place).has(placeNumber(place, rules));
  }

  add(place: TrialPlace, rules: TrialRules): void {
    this.#placesOf(place).add(placeNumber(place, rules));
  }

  /** Whether every planned repetition of a period is stored. */
  isComplete(participantId: string, period: number, rules: TrialRules): boolean {
    const present = this.#placesOf({ participantId });
    for (let repetition = 1; repetition <= rules.repetitions; repetition += 1) {
      if (!present.has(placeNumber({ period, repetition }, rules))) return false;
    }
    return true;
  }

  #placesOf({ participantId }: Pick<TrialPlace, 'participantId'>): Set<number> {
    const places = this.#present.get(participantId);
    if (places === undefined) throw new Error(`The trials of ${participantId} were not read.`);
    return places;
  }
}

function placeNumber(
  { period, repetition }: Pick<TrialPlace, 'period' | 'repetition'>,
  { repetitions }: TrialRules,
): number {
  return (period - 1) * repetitions + (repetition - 1);
}
