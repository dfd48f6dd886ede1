import fc from 'fast-check';
import { describe, expect, it } from 'vitest';
import { axisFor } from '#core/reporting/axis.ts';
import { escapeHtml, html } from '#core/reporting/html.ts';
import {
  degreesOfFreedomText,
  numberText,
  percentText,
  pValuePhrase,
  pValueText,
  signedText,
} from '#core/reporting/number-text.ts';
import { tagsOf } from './well-formed.ts';

// Expected texts follow from the rules stated in the docstrings; common practice, no source.

describe('numbers in text', () => {
  it('have the decimals asked for, a true minus, and no minus before a rounded zero', () => {
    expect(numberText(-1.005, 1)).toBe('−1.0');
    expect(numberText(-0.04, 1)).toBe('0.0');
    expect(numberText(1234.5, 0)).toMatch(/^123[45]$/);
    expect(numberText(-2.5e12, 3)).toBe('−2.50000e+12');
    expect(signedText(0.26, 1)).toBe('+0.3');
    expect(signedText(0.04, 1)).toBe('0.0');
  });

  it('give p to three decimals and never zero or one by rounding', () => {
    expect(pValueText(0.0124)).toBe('0.012');
    expect(pValueText(0.000999)).toBe('< 0.001');
    expect(pValueText(0.9996)).toBe('> 0.999');
    expect(pValueText(1)).toBe('1.000');
    expect(pValuePhrase(1e-300)).toBe('p\u00a0<\u00a00.001');
    expect(pValuePhrase(0.05)).toBe('p\u00a0=\u00a00.050');
  });

  it('drop decimals that say nothing from percentages and degrees of freedom', () => {
    expect(percentText(0.95)).toBe('95\u00a0%');
    expect(percentText(0.975)).toBe('97.5\u00a0%');
    expect(percentText(0.1)).toBe('10\u00a0%');
    expect(degreesOfFreedomText(24)).toBe('24');
    expect(degreesOfFreedomText(15.502)).toBe('15.50');
  });
});

describe('html', () => {
  it('escapes every text and leaves markup alone', () => {
    const inner = html`<b>${'a & b'}</b>`;
    expect(html`<p title="${'"x\''}">${inner}${['<', 1]}${null}</p>`.markup).toBe(
      '<p title="&quot;x&#39;"><b>a &amp; b</b>&lt;1</p>',
    );
  });

  it('lets no text become a tag or leave an attribute', () => {
    fc.assert(
      fc.property(fc.string({ unit: 'binary' }), (text) => {
        const tags = tagsOf(html`<p title="${text}">${text}</p>`.markup);
        expect(tags.map(({ name }) => name)).toEqual(['p']);
        expect(tags[0]?.attributes.get('title')).toBe(escapeHtml(text));
      }),
      { seed: 20261201 },
    );
  });
});

describe('axisFor', () => {
  it('puts round numbers around the values', () => {
    expect(axisFor([8.1, 15.7]).ticks).toEqual([8, 10, 12, 14, 16]);
    expect(axisFor([0.112, 0.187])).toMatchObject({ minimum: 0.1, maximum: 0.2, decimals: 2 });
    expect(axisFor([0, 0]).ticks.length).toBeGreaterThan(1);
  });

  it('holds every value between few ticks', () => {
    const value = fc.double({ min: -1e9, max: 1e9, noNaN: true });
    fc.assert(
      fc.property(fc.array(value, { minLength: 1, maxLength: 9 }), (values) => {
        const { minimum, maximum, ticks } = axisFor(values);
        const slack = (maximum - minimum) * 1e-6;
        for (const each of values) {
          expect(each).toBeGreaterThanOrEqual(minimum - slack);
          expect(each).toBeLessThanOrEqual(maximum + slack);
        }
        expect(ticks.length).toBeLessThan(14);
        expect(new Set(ticks).size).toBe(ticks.length);
      }),
      { seed: 20261201 },
    );
  });
});
