import {
  BadRequestException,
  Body,
  Controller,
  Get,
  HttpCode,
  NotFoundException,
  Param,
  ParseIntPipe,
  Patch,
  Post,
  Query,
} from '@nestjs/common';
import { ApiBearerAuth, ApiOkResponse, ApiTags } from '@nestjs/swagger';
import { InjectDataSource } from '@nestjs/typeorm';
import { In, type DataSource } from 'typeorm';
import { CurrentUser } from '../auth/current-user.decorator.js';
import { sitesOf, type SignedInUser } from '../auth/signed-in-user.js';
import { pageOf, type Page } from '../page.js';
import { LIVE_STATES, Proposal } from '../proposals/proposal.entity.js';
import { AlertMarks } from './alert-marks.service.js';
import { AlertRulesService } from './alert-rules.service.js';
import type { Alert } from './alert.entity.js';
import { AlertsService } from './alerts.service.js';
import {
  AcknowledgeDto,
  AlertDto,
  AlertPageDto,
  AlertQuery,
  AlertRuleDto,
  AlertRulesDto,
  ChangeAlertRuleDto,
  AlertNoteDto,
  OutOfServiceDto,
  ShelveDto,
} from './dto/alert.dto.js';
import { RULE, RULES, RULE_TITLES, type RuleName } from './rules.js';

const LONGEST_SHELF_MS = 30 * 86_400_000;

@ApiTags('alerts')
@ApiBearerAuth()
@Controller('alerts')
export class AlertsController {
  constructor(
    private readonly alerts: AlertsService,
    private readonly marks: AlertMarks,
    @InjectDataSource() private readonly dataSource: DataSource,
  ) {}

  /** Newest first, except that what stands open comes with the unacknowledged and the urgent on top. */
  @Get()
  @ApiOkResponse({ type: AlertPageDto })
  async list(@Query() query: AlertQuery, @CurrentUser() user: SignedInUser): Promise<Page<AlertDto>> {
    const { limit, cursor, state, axisId, siteId } = query;
    const from = wholeNumber(cursor ?? '0');
    const siteIds = sitesOf(user).filter((id) => siteId === undefined || id === siteId);
    const rows = await this.alerts.list({ siteIds, state, axisId, limit, from });
    const dtos = await this.dtosOf(rows.slice(0, limit));
    return pageOf(
      rows,
      limit,
      (last) => String(state === 'open' ? from + limit : last.id),
      ({ id }) => dtos.get(id)!,
    );
  }

  @Get(':id')
  @ApiOkResponse({ type: AlertDto })
  async get(@Param('id', ParseIntPipe) id: number, @CurrentUser() user: SignedInUser): Promise<AlertDto> {
    const alert = await this.alerts.get(id, user);
    return (await this.dtosOf([alert])).get(id)!;
  }

  @Post(':id/acknowledge')
  @HttpCode(200)
  @ApiOkResponse({ type: AlertDto })
  async acknowledge(
    @Param('id', ParseIntPipe) id: number,
    @Body() body: AcknowledgeDto,
    @CurrentUser() user: SignedInUser,
  ): Promise<AlertDto> {
    await this.alerts.acknowledge(id, user, body?.note ?? null);
    return this.get(id, user);
  }

  @Post(':id/shelve')
  @HttpCode(200)
  @ApiOkResponse({ type: AlertDto })
  async shelve(
    @Param('id', ParseIntPipe) id: number,
    @Body() { until, reason }: ShelveDto,
    @CurrentUser() user: SignedInUser,
  ): Promise<AlertDto> {
    const ahead = until.getTime() - Date.now();
    if (ahead <= 0) throw new BadRequestException({ errors: [{ path: 'until', message: 'must lie ahead' }] });
    if (ahead > LONGEST_SHELF_MS)
      throw new BadRequestException({ errors: [{ path: 'until', message: 'must be within 30 days' }] });
    await this.alerts.shelve(id, user, until, reason);
    return this.get(id, user);
  }

  @Post(':id/unshelve')
  @HttpCode(200)
  @ApiOkResponse({ type: AlertDto })
  async unshelve(
    @Param('id', ParseIntPipe) id: number,
    @CurrentUser() user: SignedInUser,
  ): Promise<AlertDto> {
    await this.alerts.unshelve(id, user);
    return this.get(id, user);
  }

  @Post(':id/note')
  @HttpCode(200)
  @ApiOkResponse({ type: AlertDto })
  async note(
    @Param('id', ParseIntPipe) id: number,
    @Body() { note }: AlertNoteDto,
    @CurrentUser() user: SignedInUser,
  ): Promise<AlertDto> {
    await this.alerts.addNote(id, user, note);
    return this.get(id, user);
  }

  @Post(':id/take-out-of-service')
  @HttpCode(200)
  @ApiOkResponse({ type: AlertDto })
  async takeOutOfService(
    @Param('id', ParseIntPipe) id: number,
    @Body() { reason }: OutOfServiceDto,
    @CurrentUser() user: SignedInUser,
  ): Promise<AlertDto> {
    await this.alerts.takeOutOfService(id, user, reason);
    return this.get(id, user);
  }

  @Post(':id/return-to-service')
  @HttpCode(200)
  @ApiOkResponse({ type: AlertDto })
  async returnToService(
    @Param('id', ParseIntPipe) id: number,
    @CurrentUser() user: SignedInUser,
  ): Promise<AlertDto> {
    await this.alerts.returnToService(id, user);
    return this.get(id, user);
  }

  private async dtosOf(alerts: readonly Alert[]): Promise<Map<number, AlertDto>> {
    const proposals = await this.proposalsOf(alerts.map(({ axisId }) => axisId));
    const marks = await this.marks.of(alerts, new Date());
    return new Map(
      alerts.map((alert) => [
        alert.id,
        AlertDto.of(alert, proposals.get(alert.axisId) ?? null, marks.get(alert.id)!),
      ]),
    );
  }

  /** The live proposal of each axis. */
  private async proposalsOf(axisIds: number[]): Promise<Map<number, number>> {
    if (axisIds.length === 0) return new Map();
    const rows = await this.dataSource.getRepository(Proposal).find({
      select: { id: true, axisId: true },
      where: { axisId: In(axisIds), state: In([...LIVE_STATES]) },
    });
    return new Map(rows.map(({ axisId, id }) => [axisId, id]));
  }
}

@ApiTags('alerts')
@ApiBearerAuth()
@Controller('alert-rules')
export class AlertRulesController {
  constructor(private readonly rules: AlertRulesService) {}

  @Get()
  @ApiOkResponse({ type: AlertRulesDto })
  list(): AlertRulesDto {
    return { items: RULES.map((rule) => this.dto(rule)), nextCursor: null };
  }

  @Patch(':rule')
  @ApiOkResponse({ type: AlertRuleDto })
  async change(
    @Param('rule') rule: string,
    @Body() change: ChangeAlertRuleDto,
    @CurrentUser() user: SignedInUser,
  ): Promise<AlertRuleDto> {
    const known = RULES.find((name) => name === rule);
    if (!known) throw new NotFoundException(`There is no rule "${rule}"; there are ${RULES.join(', ')}`);
    await this.rules.change(known, change, user);
    return this.dto(known);
  }

  private dto(rule: RuleName): AlertRuleDto {
    const { unit, relative } = RULE[rule];
    return { rule, title: RULE_TITLES[rule], unit, relative, ...this.rules.settingsOf(rule) };
  }
}

function wholeNumber(cursor: string): number {
  const value = Number(cursor);
  if (!Number.isInteger(value) || value < 0)
    throw new BadRequestException({ errors: [{ path: 'cursor', message: 'is none that this list gave' }] });
  return value;
}
