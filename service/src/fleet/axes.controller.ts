import {
  BadRequestException,
  Body,
  Controller,
  Get,
  Header,
  HttpCode,
  Param,
  ParseIntPipe,
  Patch,
  Post,
  Query,
} from '@nestjs/common';
import { ApiBearerAuth, ApiCreatedResponse, ApiOkResponse, ApiProduces, ApiTags } from '@nestjs/swagger';
import { CurrentUser } from '../auth/current-user.decorator.js';
import type { SignedInUser } from '../auth/signed-in-user.js';
import { RecentSeconds } from '../indicators/recent-seconds.js';
import type { Page } from '../page.js';
import { AxesService } from './axes.service.js';
import { AxisDto, AxisPageDto, AxisQuery } from './dto/axis.dto.js';
import { ChangeAxisDto, CreateAxisDto } from './dto/axis-sheet.dto.js';
import { ConfirmBaselineDto, MaintenanceDto } from './dto/axis-care.dto.js';
import { FleetSummaryDto, StripsDto } from './dto/fleet.dto.js';
import {
  EstimatePageDto,
  HistoricEstimateDto,
  IndicatorPageDto,
  IndicatorPointDto,
  IndicatorQuery,
  SpanQuery,
  TuningPageDto,
  TuningRevisionDto,
} from './dto/history.dto.js';
import { SiteQuery } from './dto/site.dto.js';
import { HistoryService } from './history.service.js';
import { tuningsCsv } from './tunings-csv.js';
import { stripPoint } from './strip-point.js';

@ApiTags('fleet')
@ApiBearerAuth()
@Controller('axes')
export class AxesController {
  constructor(
    private readonly axes: AxesService,
    private readonly history: HistoryService,
    private readonly recent: RecentSeconds,
  ) {}

  /** Worst first. */
  @Get()
  @ApiOkResponse({ type: AxisPageDto })
  async list(@Query() query: AxisQuery, @CurrentUser() user: SignedInUser): Promise<Page<AxisDto>> {
    const from = Number(query.cursor ?? 0);
    if (!Number.isInteger(from) || from < 0)
      throw new BadRequestException({ errors: [{ path: 'cursor', message: 'is none that this list gave' }] });
    const all = await this.axes.list(query, user);
    const to = from + query.limit;
    return { items: all.slice(from, to), nextCursor: to < all.length ? String(to) : null };
  }

  @Post()
  @ApiCreatedResponse({ type: AxisDto })
  async register(@Body() body: CreateAxisDto, @CurrentUser() user: SignedInUser): Promise<AxisDto> {
    return this.axes.toDto(await this.axes.register(body, user));
  }

  /** The last two minutes of every axis, second by second: what the tiles' strips start with. */
  @Get('strips')
  @ApiOkResponse({ type: StripsDto })
  async strips(@Query() { siteId }: SiteQuery, @CurrentUser() user: SignedInUser): Promise<StripsDto> {
    const ids = await this.axes.ids(user, siteId);
    return {
      items: ids.map((id) => ({ id, seconds: this.recent.of(id).map(stripPoint) })),
      nextCursor: null,
    };
  }

  @Get('summary')
  @ApiOkResponse({ type: FleetSummaryDto })
  summary(@Query() { siteId }: SiteQuery, @CurrentUser() user: SignedInUser): Promise<FleetSummaryDto> {
    return this.axes.summary(user, siteId);
  }

  @Get(':id')
  @ApiOkResponse({ type: AxisDto })
  async get(@Param('id', ParseIntPipe) id: number, @CurrentUser() user: SignedInUser): Promise<AxisDto> {
    return this.axes.toDto(await this.axes.get(id, user));
  }

  @Patch(':id')
  @ApiOkResponse({ type: AxisDto })
  async change(
    @Param('id', ParseIntPipe) id: number,
    @Body() body: ChangeAxisDto,
    @CurrentUser() user: SignedInUser,
  ): Promise<AxisDto> {
    return this.axes.toDto(await this.axes.change(id, body, user));
  }

  @Post(':id/maintenance')
  @HttpCode(200)
  @ApiOkResponse({ type: AxisDto })
  async maintain(
    @Param('id', ParseIntPipe) id: number,
    @Body() body: MaintenanceDto,
    @CurrentUser() user: SignedInUser,
  ): Promise<AxisDto> {
    return this.axes.toDto(await this.axes.maintain(id, body, user));
  }

  /** Takes the present estimate as the baseline. */
  @Post(':id/baseline')
  @HttpCode(200)
  @ApiOkResponse({ type: AxisDto })
  async confirmBaseline(
    @Param('id', ParseIntPipe) id: number,
    @Body() _: ConfirmBaselineDto,
    @CurrentUser() user: SignedInUser,
  ): Promise<AxisDto> {
    return this.axes.toDto(await this.axes.confirmBaseline(id, user));
  }

  @Get(':id/estimates')
  @ApiOkResponse({ type: EstimatePageDto })
  async estimates(
    @Param('id', ParseIntPipe) id: number,
    @Query() query: SpanQuery,
    @CurrentUser() user: SignedInUser,
  ): Promise<Page<HistoricEstimateDto>> {
    return this.history.estimates(await this.axes.get(id, user), query);
  }

  @Get(':id/indicators')
  @ApiOkResponse({ type: IndicatorPageDto })
  async indicators(
    @Param('id', ParseIntPipe) id: number,
    @Query() query: IndicatorQuery,
    @CurrentUser() user: SignedInUser,
  ): Promise<Page<IndicatorPointDto>> {
    return this.history.indicators(await this.axes.get(id, user), query);
  }

  /** Every tuning revision as CSV. */
  @Get(':id/tunings.csv')
  @ApiProduces('text/csv')
  @ApiOkResponse({ schema: { type: 'string' } })
  @Header('Content-Type', 'text/csv; charset=utf-8')
  async tuningsAsCsv(
    @Param('id', ParseIntPipe) id: number,
    @CurrentUser() user: SignedInUser,
  ): Promise<string> {
    return tuningsCsv(await this.history.tunings(await this.axes.get(id, user)));
  }

  @Get(':id/tunings')
  @ApiOkResponse({ type: TuningPageDto })
  async tunings(
    @Param('id', ParseIntPipe) id: number,
    @CurrentUser() user: SignedInUser,
  ): Promise<Page<TuningRevisionDto>> {
    return { items: await this.history.tunings(await this.axes.get(id, user)), nextCursor: null };
  }
}
