import { Controller, ForbiddenException, Get, Query } from '@nestjs/common';
import { ApiBearerAuth, ApiOkResponse, ApiTags } from '@nestjs/swagger';
import { CurrentUser } from '../auth/current-user.decorator.js';
import { mayRegisterSites, sitesOf, type SignedInUser } from '../auth/signed-in-user.js';
import { AuditChainDto, AuditPageDto, AuditQueryDto } from './dto/audit.dto.js';
import { AuditService } from './audit.service.js';

@ApiTags('Audit')
@ApiBearerAuth()
@Controller('audit')
export class AuditController {
  constructor(private readonly audit: AuditService) {}

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
    return {
      items: items.map((entry) => ({
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
      })),
      nextCursor,
    };
  }

  /** Checks that nothing in the record was altered. */
  @Get('chain')
  @ApiOkResponse({ type: AuditChainDto })
  verify(@CurrentUser() user: SignedInUser): Promise<AuditChainDto> {
    if (!mayRegisterSites(user)) throw new ForbiddenException('Checking the record is for administrators');
    return this.audit.verify();
  }
}
