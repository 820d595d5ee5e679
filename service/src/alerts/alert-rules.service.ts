import { ForbiddenException, Injectable } from '@nestjs/common';
import { BadRequestException } from '@nestjs/common';
import { InjectDataSource } from '@nestjs/typeorm';
import type { DataSource } from 'typeorm';
import { AuditService } from '../audit/audit.service.js';
import { sitesOf, type SignedInUser } from '../auth/signed-in-user.js';
import { Transactions } from '../database/transactions.js';
import { Site } from '../fleet/site.entity.js';
import { AlertRule } from './alert-rule.entity.js';
import { RULE, RULES, type RuleName, type RuleSettings } from './rules.js';

/** What each rule is set to, and who changed it. */
@Injectable()
export class AlertRulesService {
  private settings = new Map<RuleName, RuleSettings>();

  constructor(
    @InjectDataSource() private readonly dataSource: DataSource,
    private readonly transactions: Transactions,
    private readonly audit: AuditService,
  ) {}

  /** Reads the rules' settings; those that the table does not have yet are put there. */
  async load(): Promise<void> {
    const repository = this.dataSource.getRepository(AlertRule);
    const rows = new Map((await repository.find()).map((row) => [row.rule, row]));
    const missing = RULES.filter((rule) => !rows.has(rule)).map((rule) => {
      const { threshold, deadband, onDelay, offDelay, priority, mailAfter } = RULE[rule].defaults;
      return { rule, threshold, deadband, onDelay, offDelay, priority, mailAfter };
    });
    if (missing.length > 0) for (const row of await repository.save(missing)) rows.set(row.rule, row);
    this.settings = new Map([...rows].map(([rule, row]) => [rule, settingsFrom(row)]));
  }

  settingsOf(rule: RuleName): RuleSettings {
    return this.settings.get(rule) ?? RULE[rule].defaults;
  }

  /**
   * Changes a rule for the whole fleet from now on.
   *
   * @throws ForbiddenException unless the person may change rules on every site: it counts on all of them
   * @throws BadRequestException when an alert could never clear
   */
  async change(rule: RuleName, change: Partial<RuleSettings>, user: SignedInUser): Promise<void> {
    const mine = sitesOf(user, 'alert-rule.change');
    if (mine.length === 0) throw new ForbiddenException('Only engineers and approvers may change rules');
    const others = (await this.dataSource.getRepository(Site).find()).filter(({ id }) => !mine.includes(id));
    if (others.length > 0)
      throw new ForbiddenException(
        'A rule counts on every site, and you may not change rules on all of them: ask somebody who may',
      );
    const before = this.settingsOf(rule);
    const after = { ...before, ...change };
    if (after.deadband >= after.threshold)
      throw new BadRequestException({
        errors: [
          {
            path: change.deadband === undefined ? 'threshold' : 'deadband',
            message: 'the deadband must be smaller than the threshold, or the alert could never clear',
          },
        ],
      });
    await this.transactions.run(async (manager) => {
      await manager.save(AlertRule, { rule, ...after });
      await this.audit.record(manager, {
        user,
        action: 'alert-rule.changed',
        subject: { type: 'alert-rule', id: rule },
        before: { ...before },
        after: { ...after },
      });
    });
    this.settings.set(rule, after);
  }
}

/** Texts and times that a row leaves open are as the rule is made. */
function settingsFrom({ rule, ...row }: AlertRule): RuleSettings {
  const { defaults } = RULE[rule];
  return {
    ...row,
    unknownAfter: row.unknownAfter ?? defaults.unknownAfter,
    respondWithin: row.respondWithin ?? defaults.respondWithin,
    consequence: row.consequence ?? defaults.consequence,
  };
}
