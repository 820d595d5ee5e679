import {
  BadRequestException,
  Body,
  Controller,
  Delete,
  Get,
  HttpCode,
  Param,
  ParseIntPipe,
  Post,
  Query,
  Res,
  StreamableFile,
  UploadedFile,
  UseInterceptors,
} from '@nestjs/common';
import { FileInterceptor } from '@nestjs/platform-express';
import {
  ApiBearerAuth,
  ApiBody,
  ApiConsumes,
  ApiCreatedResponse,
  ApiExtraModels,
  ApiNoContentResponse,
  ApiOkResponse,
  ApiProduces,
  ApiTags,
} from '@nestjs/swagger';
import { plainToInstance } from 'class-transformer';
import { validate } from 'class-validator';
import type { Response } from 'express';
import { rm } from 'node:fs/promises';
import { Readable } from 'node:stream';
import { CurrentUser } from '../auth/current-user.decorator.js';
import type { SignedInUser } from '../auth/signed-in-user.js';
import { pageOf } from '../page.js';
import { fieldProblems } from '../problem.filter.js';
import type { Capture } from './capture.entity.js';
import { CapturesService } from './captures.service.js';
import {
  CaptureBaselineDto,
  CaptureDto,
  CaptureIdDto,
  CaptureMappingDto,
  CapturePageDto,
  CaptureQuery,
  CaptureTraceDto,
  RecordCaptureDto,
  TraceQuery,
  UploadCaptureDto,
} from './dto/capture.dto.js';
import { LiveCaptures } from './live-captures.service.js';
import { thinnedIndices, TRACE_COLUMNS, type CaptureTrace } from './trace-file.js';

const CSV = 'text/csv';

@ApiTags('Captures')
@ApiExtraModels(CaptureMappingDto)
@ApiBearerAuth()
@Controller()
export class CapturesController {
  constructor(
    private readonly captures: CapturesService,
    private readonly live: LiveCaptures,
  ) {}

  /** A CSV file with a header row, at most 200 MB; it is worked out in the background. */
  @Post('captures')
  @UseInterceptors(FileInterceptor('file'))
  @ApiConsumes('multipart/form-data')
  @ApiBody({ type: UploadCaptureDto })
  @ApiCreatedResponse({ type: CaptureIdDto })
  async upload(
    @CurrentUser() user: SignedInUser,
    @Body() { axisId, siteId, mapping }: UploadCaptureDto,
    @UploadedFile() file?: Express.Multer.File,
  ): Promise<CaptureIdDto> {
    if (!file) throw new BadRequestException({ errors: [{ path: 'file', message: 'is needed' }] });
    let checked: CaptureMappingDto;
    try {
      checked = await mappingOf(mapping);
    } catch (error) {
      await rm(file.path, { force: true });
      throw error;
    }
    const { id } = await this.captures.upload(user, file.path, file.originalname, checked, {
      axisId,
      siteId,
    });
    return { id };
  }

  @Get('captures')
  @ApiOkResponse({ type: CapturePageDto })
  async list(@CurrentUser() user: SignedInUser, @Query() query: CaptureQuery): Promise<CapturePageDto> {
    const before = query.cursor === undefined ? undefined : Number(query.cursor);
    if (before !== undefined && !Number.isInteger(before))
      throw new BadRequestException({ errors: [{ path: 'cursor', message: 'is not one of this list' }] });
    const rows = await this.captures.list(user, { axisId: query.axisId, limit: query.limit, before });
    return pageOf(rows, query.limit, ({ id }) => String(id), captureDto);
  }

  @Get('captures/:id')
  @ApiOkResponse({ type: CaptureDto })
  async get(@CurrentUser() user: SignedInUser, @Param('id', ParseIntPipe) id: number): Promise<CaptureDto> {
    return captureDto(await this.captures.get(id, user));
  }

  /** Thinned for a chart, extremes kept. */
  @Get('captures/:id/trace')
  @ApiOkResponse({ type: CaptureTraceDto })
  async trace(
    @CurrentUser() user: SignedInUser,
    @Param('id', ParseIntPipe) id: number,
    @Query() { points }: TraceQuery,
  ): Promise<CaptureTraceDto> {
    const trace = await this.captures.trace(id, user);
    const kept = thinnedIndices(trace, points);
    const of = (values: Float32Array): (number | null)[] =>
      kept.map((i) => (Number.isNaN(values[i]!) ? null : values[i]!));
    const columns = Object.fromEntries(TRACE_COLUMNS.map((name) => [name, of(trace.columns[name])]));
    return { time: kept.map((i) => i * trace.sampleTime), ...columns } as unknown as CaptureTraceDto;
  }

  /** Every sample: s, mm, mm, %, mm/s, mm/s, mm. */
  @Get('captures/:id/trace.csv')
  @ApiProduces(CSV)
  @ApiOkResponse({ schema: { type: 'string' } })
  async traceCsv(
    @CurrentUser() user: SignedInUser,
    @Param('id', ParseIntPipe) id: number,
    @Res({ passthrough: true }) response: Response,
  ): Promise<StreamableFile> {
    const trace = await this.captures.trace(id, user);
    download(response, CSV, `capture-${id}-trace.csv`);
    return new StreamableFile(Readable.from(traceLines(trace)));
  }

  /** The same as JSON: one array for each column, null where there is no sample. */
  @Get('captures/:id/trace.json')
  @ApiOkResponse({ type: CaptureTraceDto })
  async traceJson(
    @CurrentUser() user: SignedInUser,
    @Param('id', ParseIntPipe) id: number,
    @Res({ passthrough: true }) response: Response,
  ): Promise<StreamableFile> {
    const trace = await this.captures.trace(id, user);
    download(response, 'application/json', `capture-${id}-trace.json`);
    return new StreamableFile(Readable.from(traceJsonParts(trace)));
  }

  /** What was identified, one quantity a row. */
  @Get('captures/:id/result.csv')
  @ApiProduces(CSV)
  @ApiOkResponse({ schema: { type: 'string' } })
  async resultCsv(
    @CurrentUser() user: SignedInUser,
    @Param('id', ParseIntPipe) id: number,
    @Res({ passthrough: true }) response: Response,
  ): Promise<StreamableFile> {
    const capture = captureDto(await this.captures.get(id, user));
    download(response, CSV, `capture-${id}-result.csv`);
    return new StreamableFile(Buffer.from(resultLines(capture)));
  }

  @Post('captures/:id/cancel')
  @HttpCode(200)
  @ApiOkResponse({ type: CaptureDto })
  async cancel(
    @CurrentUser() user: SignedInUser,
    @Param('id', ParseIntPipe) id: number,
  ): Promise<CaptureDto> {
    return captureDto(await this.captures.cancel(id, user));
  }

  @Delete('captures/:id')
  @HttpCode(204)
  @ApiNoContentResponse()
  async remove(@CurrentUser() user: SignedInUser, @Param('id', ParseIntPipe) id: number): Promise<void> {
    await this.captures.remove(id, user);
  }

  /** Takes what was identified as the baseline of the axis. */
  @Post('captures/:id/baseline')
  @HttpCode(204)
  @ApiNoContentResponse()
  async baseline(
    @CurrentUser() user: SignedInUser,
    @Param('id', ParseIntPipe) id: number,
    @Body() { axisId }: CaptureBaselineDto,
  ): Promise<void> {
    await this.captures.takeAsBaseline(id, user, axisId);
  }

  /** Records the next seconds of the live stream. */
  @Post('axes/:id/captures')
  @ApiCreatedResponse({ type: CaptureIdDto })
  async record(
    @CurrentUser() user: SignedInUser,
    @Param('id', ParseIntPipe) axisId: number,
    @Body() { seconds }: RecordCaptureDto,
  ): Promise<CaptureIdDto> {
    const { id } = await this.live.onDemand(axisId, seconds, user);
    return { id };
  }
}

/** The form field `mapping`, checked like any other body. */
async function mappingOf(json: string): Promise<CaptureMappingDto> {
  let value: unknown;
  try {
    value = JSON.parse(json);
  } catch {
    throw new BadRequestException({ errors: [{ path: 'mapping', message: 'is not JSON' }] });
  }
  if (typeof value !== 'object' || value === null || Array.isArray(value))
    throw new BadRequestException({ errors: [{ path: 'mapping', message: 'must be an object' }] });
  const mapping = plainToInstance(CaptureMappingDto, value);
  const errors = await validate(mapping, { whitelist: true, forbidNonWhitelisted: true });
  if (errors.length > 0) throw new BadRequestException({ errors: fieldProblems(errors, 'mapping') });
  return mapping;
}

function captureDto(capture: Capture): CaptureDto {
  const { id, siteId, axisId, source, alertId, createdAt, fileName, status, samples, sampleTime, duration } =
    capture;
  const estimate = capture.result?.estimate ?? null;
  return {
    id,
    siteId,
    axisId,
    axisTag: capture.axis?.tag ?? null,
    timeZone: capture.site.timeZone,
    source,
    alertId,
    createdAt,
    createdBy: capture.createdBy?.name ?? null,
    fileName,
    status,
    recording: status === 'queued' && !capture.recorded,
    ...(capture.problem !== null && { problem: capture.problem }),
    samples,
    sampleTime,
    duration,
    ...(capture.result && {
      identification: {
        gain: estimate?.gain ?? null,
        pole: estimate?.pole ?? null,
        ...(estimate?.gainForward && { gainForward: estimate.gainForward }),
        ...(estimate?.gainReverse && { gainReverse: estimate.gainReverse }),
        coulomb: estimate?.coulomb ?? null,
        bias: estimate?.bias ?? null,
        deadTime: estimate?.deadTime ?? null,
        fitPct: estimate?.fitPct ?? null,
        movingSeconds: capture.result.movingSeconds,
        verdict: capture.result.verdict,
        remarks: capture.result.remarks,
      },
    }),
  };
}

function download(response: Response, type: string, name: string): void {
  response.set({ 'Content-Type': type, 'Content-Disposition': `attachment; filename="${name}"` });
}

/** Samples of a trace that are written at a time. */
const PART = 5000;
const timeOf = (sample: number, sampleTime: number): number => Number((sample * sampleTime).toFixed(7));

function* traceLines({ sampleTime, length, columns }: CaptureTrace): Generator<string> {
  yield `time_s,target_mm,position_mm,output_pct,velocity_mm_s,simulated_velocity_mm_s,position_residual_mm\r\n`;
  const cell = (value: number): string => (Number.isNaN(value) ? '' : String(value));
  for (let from = 0; from < length; from += PART) {
    let lines = '';
    for (let i = from; i < Math.min(length, from + PART); i++)
      lines += `${timeOf(i, sampleTime)},${TRACE_COLUMNS.map((name) => cell(columns[name][i]!)).join(',')}\r\n`;
    yield lines;
  }
}

function* traceJsonParts({ sampleTime, length, columns }: CaptureTrace): Generator<string> {
  const all = [
    { name: 'time', at: (i: number) => timeOf(i, sampleTime) },
    ...TRACE_COLUMNS.map((name) => ({ name, at: (i: number) => columns[name][i]! })),
  ];
  for (const [column, { name, at }] of all.entries()) {
    yield `${column === 0 ? '{' : '],'}${JSON.stringify(name)}:[`;
    for (let from = 0; from < length; from += PART) {
      const values = Array.from({ length: Math.min(PART, length - from) }, (_, i) => at(from + i));
      // JSON.stringify writes NaN as null.
      yield `${from === 0 ? '' : ','}${JSON.stringify(values).slice(1, -1)}`;
    }
  }
  yield ']}';
}

function resultLines({ identification }: CaptureDto): string {
  if (!identification) return 'quantity,value,low,high,unit\r\n';
  const { gain, pole, gainForward, gainReverse, coulomb, bias, deadTime, fitPct, verdict } = identification;
  const rows: [string, { value: number; low: number; high: number } | null | undefined, string][] = [
    ['gain', gain, '(mm/s)/%'],
    ['gain forward', gainForward, '(mm/s)/%'],
    ['gain reverse', gainReverse, '(mm/s)/%'],
    ['pole', pole, 'rad/s'],
    ['Coulomb friction', coulomb, '%'],
    ['bias', bias, '%'],
  ];
  return [
    'quantity,value,low,high,unit',
    ...rows.flatMap(([name, i, unit]) => (i ? [`${name},${i.value},${i.low},${i.high},${unit}`] : [])),
    ...(deadTime === null ? [] : [`dead time,${deadTime},,,s`]),
    ...(fitPct === null ? [] : [`fit,${fitPct},,,%`]),
    `verdict,${verdict},,,`,
    '',
  ].join('\r\n');
}
