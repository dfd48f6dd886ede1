import { createHash } from 'node:crypto';
import {
  COMFORT_THRESHOLDS,
  chanceAbove,
  linerOf,
  PER_PERIOD,
  SPREAD,
  TYPICAL_SECONDS,
} from './truth.ts';

/** Numbers in [0, 1) that follow from a text: the same text gives the same numbers anywhere. */
export type Draw = () => number;

export function drawsFrom(text: string): Draw {
  let block = createHash('sha256').update(text).digest();
  let offset = 0;
  return () => {
    if (offset + 4 > block.length) {
      block = createHash('sha256').update(block).digest();
      offset = 0;
    }
    offset += 4;
    return block.readUInt32BE(offset - 4) / 2 ** 32;
  };
}

/** A standard normal number. Source: Box & Muller 1958. */
function normal(draw: Draw): number {
  return Math.sqrt(-2 * Math.log(1 - draw())) * Math.cos(2 * Math.PI * draw());
}

/**
 * A Poisson count, by multiplying uniforms; for small means. Source: Knuth, TAOCP vol. 2, 3.4.1.
 */
function poisson(mean: number, draw: Draw): number {
  const floor = Math.exp(-mean);
  let count = 0;
  for (let product = draw(); product > floor; product *= draw()) count += 1;
  return count;
}

/** One participant of the invented world, who behaves by the truth. */
export interface SimulatedParticipant {
  /** The values of one period's trials, given the liner worn now and the one before. */
  period(given: {
    readonly periodIndex: number;
    readonly liner: string;
    readonly before: string | null;
    readonly repetitions: number;
  }): SimulatedTrial[];
}

export interface SimulatedTrial {
  readonly seconds: number;
  readonly pegsDropped: number;
  readonly misseated: boolean;
  /** Asked once, with the first trial of the period. */
  readonly comfort: number | null;
}

export function simulatedParticipant(draw: Draw): SimulatedParticipant {
  const logOwn = SPREAD.participant * normal(draw);
  return {
    period: ({ periodIndex, liner, before, repetitions }) => {
      const truth = linerOf(liner);
      const carried = before === null ? 0 : linerOf(before).carryover;
      const logMean =
        Math.log(TYPICAL_SECONDS * truth.timeRatio) +
        logOwn +
        carried +
        PER_PERIOD.logTime * periodIndex +
        SPREAD.period * normal(draw);
      const pegs = truth.pegsDropped + PER_PERIOD.pegsDropped * periodIndex;
      const chance = truth.misseated + PER_PERIOD.misseated * periodIndex;
      const rating = comfortRating(truth.comfort + PER_PERIOD.comfort * periodIndex, draw());
      return Array.from({ length: repetitions }, (_unused, index) => ({
        seconds: Number(Math.exp(logMean + SPREAD.trial * normal(draw)).toFixed(2)),
        pegsDropped: poisson(pegs, draw),
        misseated: draw() < chance,
        comfort: index === 0 ? rating : null,
      }));
    },
  };
}

function comfortRating(comfort: number, uniform: number): number {
  return 1 + COMFORT_THRESHOLDS.filter((t) => uniform < chanceAbove(t, comfort)).length;
}
