import { Controller, ForbiddenException, Get, Query, Res, StreamableFile } from '@nestjs/common';
import { ApiBearerAuth, ApiOkResponse, ApiProduces, ApiTags } from '@nestjs/swagger';
import type { Response } from 'express';
import { Readable } from 'node:stream';
import { CurrentUser } from '../auth/current-user.decorator.js';
import { mayRegisterSites, sitesOf, type SignedInUser } from '../auth/signed-in-user.js';
import { Transactions } from '../database/transactions.js';
import { AuditChainDto, AuditEntryDto, AuditPageDto, AuditQueryDto, AuditScopeDto } from './dto/audit.dto.js';
import type { AuditEntry } from './audit-entry.entity.js';
import { AuditService } from './audit.service.js';

/** From memory: jsonlines.org's suggestion; no media type is registered. */
const JSON_LINES = 'application/jsonl';

@ApiTags('Audit')
@ApiBearerAuth()
@Controller('audit')
export class AuditController {
  constructor(
    private readonly audit: AuditService,
    private readonly transactions: Transactions,
  ) {}

  @Get()
  @ApiOkResponse({ type: AuditPageDto })
  async list(@CurrentUser() user: SignedInUser, @Query() query: AuditQueryDto): Promise<AuditPageDto> {
    if (sitesOf(user, 'audit.read').length === 0)
      throw new ForbiddenException('The record is for engineers and administrators');
    const { items, nextCursor } = await this.audit.list(user, {
      siteId: query.siteId,
      subjectType: query.subjectType,
      subjectId: query.subjectId,
      limit: query.limit,
      beforeId: query.cursor,
    });
    return { items: items.map(entryOf), nextCursor };
  }

  /** What this person may read, oldest first, one JSON object a line, with the hashes of the chain. */
  @Get('export')
  @ApiProduces(JSON_LINES)
  @ApiOkResponse({ schema: { type: 'string' } })
  async export(
    @CurrentUser() user: SignedInUser,
    @Query() query: AuditScopeDto,
    @Res({ passthrough: true }) response: Response,
  ): Promise<StreamableFile> {
    if (sitesOf(user, 'people.manage').length === 0)
      throw new ForbiddenException('Exporting the record is for administrators');
    await this.transactions.run((manager) =>
      this.audit.record(manager, {
        user,
        action: 'record.exported',
        subject: { type: 'person', id: user.id },
        after: { ...query },
      }),
    );
    response.set({
      'Content-Type': JSON_LINES,
      'Content-Disposition': 'attachment; filename="polewright-record.jsonl"',
    });
    return new StreamableFile(Readable.from(linesOf(this.audit.export(user, query))));
  }

  /** Checks that nothing in the record was altered. */
  @Get('chain')
  @ApiOkResponse({ type: AuditChainDto })
  async verify(@CurrentUser() user: SignedInUser): Promise<AuditChainDto> {
    if (!mayRegisterSites(user)) throw new ForbiddenException('Checking the record is for administrators');
    const { broken, ...report } = await this.audit.verify();
    // The chain spans all sites; of an entry of a site that is not theirs people learn its number and no more.
    const theirs = broken && (broken.siteId === null || sitesOf(user, 'audit.read').includes(broken.siteId));
    const told = theirs && {
      at: broken.at,
      actor: broken.actor,
      action: broken.action,
      subjectType: broken.subjectType,
      subjectId: broken.subjectId,
    };
    return { ...report, broken: told || null };
  }
}

const entryOf = (entry: AuditEntry): AuditEntryDto => ({
  id: entry.id,
  at: entry.at.toISOString(),
  actor: entry.actor,
  userId: entry.userId,
  action: entry.action,
  subjectType: entry.subjectType,
  subjectId: entry.subjectId,
  siteId: entry.siteId,
  note: entry.note,
  before: entry.before,
  after: entry.after,
});

async function* linesOf(batches: AsyncIterable<AuditEntry[]>): AsyncGenerator<string> {
  for await (const batch of batches)
    yield (
      batch
        .map((entry) =>
          JSON.stringify({ ...entryOf(entry), previousHash: entry.previousHash, hash: entry.hash }),
        )
        .join('\n') + '\n'
    );
}
