/** What the gateways' warnings came to, site by site: opened, come true, said again, and whether their lives make sense. */
import type { WarningMessage } from '@stillwell/protocol';

/** Counts of one site. */
export interface WarningCounts {
  messages: number;
  opened: number;
  /** Of those that ended or were crossed: the reading went past the limit while they were open. */
  cameTrue: number;
  closed: number;
  expired: number;
  /** Closed or expired without having opened, or opened while open: a restart must make neither. */
  odd: number;
  /** Minutes from opening to the crossing. */
  readonly leads: number[];
}

interface Life {
  readonly since: string;
  isCrossed: boolean;
}

/** See the file head. */
export class WarningWatch {
  readonly bySite = new Map<string, WarningCounts>();
  private readonly open = new Map<string, Life>();

  /** Takes one message in. */
  hear({ site, signal, warnings }: WarningMessage): void {
    const counts = this.of(site);
    counts.messages++;
    for (const { limit, status, since, crossed_at: crossedAt } of warnings) {
      const key = `${site}/${signal}/${limit}`;
      let life = this.open.get(key);
      if (status === 'opened') {
        // The same first word twice is the broker's doing, at QoS 1; another beginning is not.
        if (life !== undefined && life.since !== since) counts.odd++;
        if (life?.since !== since) counts.opened++;
        if (life?.since !== since) life = { since, isCrossed: false };
        this.open.set(key, life);
      } else if (life === undefined || life.since !== since) {
        counts.odd++;
        continue;
      }
      if (crossedAt !== null && !life.isCrossed) {
        life.isCrossed = true;
        counts.cameTrue++;
        counts.leads.push((Date.parse(crossedAt) - Date.parse(since)) / 60_000);
      }
      if (status !== 'closed' && status !== 'expired') continue;
      counts[status]++;
      this.open.delete(key);
    }
  }

  /** Counts of a site, all nought where nothing was heard of it. */
  of(site: string): WarningCounts {
    let counts = this.bySite.get(site);
    if (counts === undefined) {
      counts = { messages: 0, opened: 0, cameTrue: 0, closed: 0, expired: 0, odd: 0, leads: [] };
      this.bySite.set(site, counts);
    }
    return counts;
  }
}
