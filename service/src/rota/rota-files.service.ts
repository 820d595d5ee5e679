import { BadRequestException, Injectable } from '@nestjs/common';
import { EventEmitter2 } from '@nestjs/event-emitter';
import type { SignedInUser } from '../auth/signed-in-user.js';
import { requireRole } from '../auth/signed-in-user.js';
import { Transactions } from '../database/transactions.js';
import { tell } from '../events.js';
import { OverridesService, overrideProblems } from './overrides.service.js';
import { readRotaCsv, shiftsCsv } from './rota-csv.js';
import { RotaService } from './rota.service.js';
import { loadSiteRota } from './site-rota.js';

/** The rota as a file, and people who stand in from one. */
@Injectable()
export class RotaFilesService {
  constructor(
    private readonly rota: RotaService,
    private readonly overrides: OverridesService,
    private readonly transactions: Transactions,
    private readonly emitter: EventEmitter2,
  ) {}

  /** A site's shifts as CSV. */
  async export(user: SignedInUser, siteId: number, from: Date, to: Date): Promise<string> {
    const { shifts, site, people } = await this.rota.view(user, siteId, from, to);
    return shiftsCsv(shifts, site.timeZone, (id) => people.get(id));
  }

  /**
   * Takes every line of a file as an override, or, when one line is bad, none. A line that says what is so already adds
   * nothing, so the same file may come twice.
   *
   * @throws BadRequestException that names every bad line
   */
  async import(
    user: SignedInUser,
    siteId: number,
    text: string,
  ): Promise<{ added: number; alreadyThere: number }> {
    requireRole(user, siteId, 'rota.change', `site ${siteId}`);
    const now = new Date();
    const result = await this.transactions.run(async (manager) => {
      const rota = await loadSiteRota(manager, siteId, now);
      const { lines, problems } = readRotaCsv(text, rota.site.timeZone);
      const byEmail = new Map([...rota.available.values()].map(({ id, email }) => [email, id]));
      const wanted = lines.map(({ line, email, ...span }) => {
        const userId = byEmail.get(email);
        const wrong =
          userId === undefined
            ? [{ message: `${email} cannot acknowledge alerts on this site` }]
            : overrideProblems(rota, { userId, ...span }, now);
        if (wrong.length > 0)
          problems.push({ path: `line ${line}`, message: wrong.map(({ message }) => message).join('; ') });
        return { userId: userId ?? 0, ...span };
      });
      if (problems.length > 0)
        throw new BadRequestException({ message: 'Nothing was stored.', errors: problems.sort(byLine) });
      const fresh = wanted.filter(
        ({ userId, from, to }) =>
          !rota.overrides.some(
            (known) => known.userId === userId && +known.from === +from && +known.to === +to,
          ),
      );
      for (const override of fresh) await this.overrides.store(manager, user, siteId, override);
      return { added: fresh.length, alreadyThere: wanted.length - fresh.length };
    });
    tell(this.emitter, 'rota.changed', { siteId });
    return result;
  }
}

const lineOf = ({ path }: { path: string }): number => Number(path.replace('line ', '')) || 0;
const byLine = (a: { path: string }, b: { path: string }): number => lineOf(a) - lineOf(b);
