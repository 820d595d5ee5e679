import {
  BadRequestException,
  Body,
  Controller,
  Delete,
  Get,
  Header,
  HttpCode,
  Param,
  ParseIntPipe,
  Post,
  Query,
  Res,
  UploadedFile,
  UseInterceptors,
} from '@nestjs/common';
import { FileInterceptor } from '@nestjs/platform-express';
import {
  ApiBearerAuth,
  ApiBody,
  ApiConsumes,
  ApiCreatedResponse,
  ApiNoContentResponse,
  ApiOkResponse,
  ApiProduces,
  ApiTags,
} from '@nestjs/swagger';
import { Throttle } from '@nestjs/throttler';
import type { Response } from 'express';
import { CurrentUser } from '../auth/current-user.decorator.js';
import { Public } from '../auth/public.decorator.js';
import type { SignedInUser } from '../auth/signed-in-user.js';
import { CalendarFeedsService } from './calendar-feeds.service.js';
import {
  FeedsDto,
  MakeFeedDto,
  NewFeedDto,
  RotaFileDto,
  RotaImportDto,
  RotaSpanQuery,
} from './dto/rota.dto.js';
import { RotaFilesService } from './rota-files.service.js';

/** ms */
const DAY = 24 * 3_600_000;
const USUAL_SPAN = 28 * DAY;
const LONGEST_SPAN = 400 * DAY;
/** Bytes of a file of people who stand in. */
const LARGEST_FILE = 512 * 1024;
/** Reads of feeds from one address in a minute: calendar programs ask about once an hour. */
const FEED_READS = { default: { ttl: 60_000, limit: 60 } };

/** The rota outside these pages: as CSV and in calendar programs. */
@ApiTags('Rota')
@Controller()
export class CalendarController {
  constructor(
    private readonly files: RotaFilesService,
    private readonly feeds: CalendarFeedsService,
  ) {}

  @Get('rota/:siteId/shifts.csv')
  @ApiBearerAuth()
  @ApiProduces('text/csv')
  @ApiOkResponse({ schema: { type: 'string' } })
  @Header('Content-Type', 'text/csv; charset=utf-8')
  async export(
    @CurrentUser() user: SignedInUser,
    @Param('siteId', ParseIntPipe) siteId: number,
    @Query() query: RotaSpanQuery,
    @Res({ passthrough: true }) response: Response,
  ): Promise<string> {
    const from = new Date(query.from ?? Date.now());
    const to = new Date(query.to ?? from.getTime() + USUAL_SPAN);
    const length = to.getTime() - from.getTime();
    if (!(length > 0 && length <= LONGEST_SPAN))
      throw new BadRequestException({
        errors: [{ path: 'to', message: 'must lie within 400 days after from' }],
      });
    response.set('Content-Disposition', `attachment; filename="rota-${siteId}.csv"`);
    return this.files.export(user, siteId, from, to);
  }

  /** People who stand in, by a CSV file: all of its lines, or with one bad line none. */
  @Post('rota/:siteId/overrides.csv')
  @HttpCode(200)
  @ApiBearerAuth()
  @UseInterceptors(FileInterceptor('file', { limits: { fileSize: LARGEST_FILE, files: 1 } }))
  @ApiConsumes('multipart/form-data')
  @ApiBody({ type: RotaFileDto })
  @ApiOkResponse({ type: RotaImportDto })
  import(
    @CurrentUser() user: SignedInUser,
    @Param('siteId', ParseIntPipe) siteId: number,
    @UploadedFile() file?: Express.Multer.File,
  ): Promise<RotaImportDto> {
    if (!file) throw new BadRequestException({ errors: [{ path: 'file', message: 'is needed' }] });
    return this.files.import(user, siteId, file.buffer.toString('utf8'));
  }

  /** The person's own feeds. */
  @Get('rota/feeds')
  @ApiBearerAuth()
  @ApiOkResponse({ type: FeedsDto })
  async list(@CurrentUser() user: SignedInUser): Promise<FeedsDto> {
    return {
      items: (await this.feeds.list(user)).map(({ id, siteId, site, own, createdAt, lastReadAt }) => ({
        id,
        siteId,
        siteName: site.name,
        own,
        createdAt: createdAt.toISOString(),
        lastReadAt: lastReadAt?.toISOString() ?? null,
      })),
      nextCursor: null,
    };
  }

  @Post('rota/:siteId/feeds')
  @ApiBearerAuth()
  @ApiCreatedResponse({ type: NewFeedDto })
  make(
    @CurrentUser() user: SignedInUser,
    @Param('siteId', ParseIntPipe) siteId: number,
    @Body() { own }: MakeFeedDto,
  ): Promise<NewFeedDto> {
    return this.feeds.create(user, siteId, own);
  }

  @Delete('rota/feeds/:id')
  @ApiBearerAuth()
  @HttpCode(204)
  @ApiNoContentResponse()
  revoke(@CurrentUser() user: SignedInUser, @Param('id', ParseIntPipe) id: number): Promise<void> {
    return this.feeds.revoke(user, id);
  }

  /** What a calendar program reads, without signing in: the address is the secret. */
  @Public()
  @Throttle(FEED_READS)
  @Get('calendar/:token.ics')
  @ApiProduces('text/calendar')
  @ApiOkResponse({ schema: { type: 'string' } })
  @Header('Content-Type', 'text/calendar; charset=utf-8')
  @Header('Cache-Control', 'private, no-cache')
  calendar(@Param('token') token: string): Promise<string> {
    return this.feeds.calendar(token, new Date());
  }
}
