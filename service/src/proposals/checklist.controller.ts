import { Body, Controller, Get, Param, ParseIntPipe, Put } from '@nestjs/common';
import { ApiBearerAuth, ApiOkResponse, ApiTags } from '@nestjs/swagger';
import { CurrentUser } from '../auth/current-user.decorator.js';
import { requireRole, type SignedInUser } from '../auth/signed-in-user.js';
import { CHECKLIST } from './checklist.js';
import { ChecklistService } from './checklist.service.js';
import { ChangeChecklistDto, SiteChecklistDto } from './dto/checklist.dto.js';

/** What has to be confirmed at the machine before gains are sent. */
@ApiTags('proposals')
@ApiBearerAuth()
@Controller('sites/:siteId/checklist')
export class ChecklistController {
  constructor(private readonly checklists: ChecklistService) {}

  @Get()
  @ApiOkResponse({ type: SiteChecklistDto })
  async get(
    @Param('siteId', ParseIntPipe) siteId: number,
    @CurrentUser() user: SignedInUser,
  ): Promise<SiteChecklistDto> {
    requireRole(user, siteId, 'see', `site ${siteId}`);
    const items = await this.checklists.of(siteId);
    return { siteId, always: [...CHECKLIST], own: items.slice(CHECKLIST.length) };
  }

  /** Replaces the site's own items; what holds everywhere stays. */
  @Put()
  @ApiOkResponse({ type: SiteChecklistDto })
  async replace(
    @Param('siteId', ParseIntPipe) siteId: number,
    @Body() { items }: ChangeChecklistDto,
    @CurrentUser() user: SignedInUser,
  ): Promise<SiteChecklistDto> {
    await this.checklists.replace(siteId, items, user);
    return this.get(siteId, user);
  }
}
