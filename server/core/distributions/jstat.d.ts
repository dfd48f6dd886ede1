/** The part of jstat that Fairturn uses; the package brings no types of its own. */
declare module 'jstat' {
  interface Jstat {
    readonly normal: { inv(p: number, mean: number, standardDeviation: number): number };
    readonly studentt: { inv(p: number, degreesOfFreedom: number): number };
    readonly centralF: { inv(p: number, first: number, second: number): number };
    readonly chisquare: { inv(p: number, degreesOfFreedom: number): number };
  }
  const jstat: Jstat;
  export default jstat;
}
