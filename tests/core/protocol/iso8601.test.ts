import { describe, expect, it } from 'vitest';
import { parseDuration } from '#core/protocol/iso8601.ts';

describe('a duration', () => {
  // published: ISO 8601-1:2019, 5.5.2 gives the components; their lengths are SI and the 7-day week
  it.each([
    ['P7D', 604_800_000],
    ['P1W', 604_800_000],
    ['P1W2D', 777_600_000],
    ['PT30M', 1_800_000],
    ['P1DT12H', 129_600_000],
    ['PT1.5H', 5_400_000],
    ['PT0,5S', 500],
    ['P0D', 0],
    ['PT0S', 0],
    ['P1DT2H3M4.5S', 93_784_500],
    ['PT36H', 129_600_000],
  ])('%s is %i ms', (text, milliseconds) => {
    expect(parseDuration(text)).toBe(milliseconds);
  });

  it.each(['P1Y', 'P2M', 'P1Y2M3D', 'P1M2DT3H', 'P0.5Y', 'P1YT5M'])(
    '%s has no fixed length',
    (text) => {
      expect(() => parseDuration(text)).toThrow(/years or months/);
    },
  );

  it.each([
    '',
    'P',
    'PT',
    'P1DT',
    '7D',
    'P-1D',
    '-P1D',
    'P1H',
    'PT1D',
    'PT1M1H',
    'p1d',
    ' P1D',
    '1',
    'P1D\n',
  ])('%j cannot be read', (text) => {
    expect(() => parseDuration(text)).toThrow(/is not an ISO 8601 duration/);
  });

  it('has a fraction in its smallest component only', () => {
    expect(() => parseDuration('P1.5DT1H')).toThrow(/smallest component/);
  });

  it('is not longer than a study could be', () => {
    expect(() => parseDuration('P100001D')).toThrow(/100,000 days/);
    expect(() => parseDuration(`P${'9'.repeat(400)}D`)).toThrow(/100,000 days/);
  });
});
