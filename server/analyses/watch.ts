import type { AnalysisResponse } from './schemas.ts';

/** How often followed analyses are read again. One query serves all followers of a process. */
const READING_MS = 500;

export interface AnalysisWatch {
  /** Calls `listener` whenever the analysis differs from `known`; returns what ends that. */
  follow(known: AnalysisResponse, listener: (analysis: AnalysisResponse) => void): () => void;
}

interface Follower {
  known: string;
  readonly listener: (analysis: AnalysisResponse) => void;
}

/**
 * Watches rows rather than the worker: the API process that streams and the worker that runs share
 * nothing but the database, and may be on different machines.
 */
export function createAnalysisWatch(options: {
  readonly read: (ids: readonly string[]) => Promise<AnalysisResponse[]>;
  readonly onFault: (error: unknown) => void;
}): AnalysisWatch {
  const followers = new Map<string, Set<Follower>>();
  let reading = false;

  const readAgain = async () => {
    if (followers.size === 0) {
      reading = false;
      return;
    }
    try {
      for (const analysis of await options.read([...followers.keys()])) {
        const text = JSON.stringify(analysis);
        for (const follower of followers.get(analysis.id) ?? []) {
          if (follower.known === text) continue;
          follower.known = text;
          follower.listener(analysis);
        }
      }
    } catch (error) {
      options.onFault(error);
    }
    setTimeout(readAgain, READING_MS);
  };

  return {
    follow: (known, listener) => {
      const follower: Follower = { known: JSON.stringify(known), listener };
      const group = followers.get(known.id) ?? new Set();
      followers.set(known.id, group.add(follower));
      if (!reading) setTimeout(readAgain, READING_MS);
      reading = true;
      return () => {
        group.delete(follower);
        if (group.size === 0 && followers.get(known.id) === group) followers.delete(known.id);
      };
    },
  };
}
