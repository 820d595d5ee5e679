import { Body, Controller, ForbiddenException, Get, HttpCode, Patch, Post } from '@nestjs/common';
import { ApiAcceptedResponse, ApiBearerAuth, ApiOkResponse, ApiTags } from '@nestjs/swagger';
import { InjectDataSource } from '@nestjs/typeorm';
import type { DataSource } from 'typeorm';
import { CurrentUser } from '../auth/current-user.decorator.js';
import { sitesOf, type SignedInUser } from '../auth/signed-in-user.js';
import { Site } from '../fleet/site.entity.js';
import { ChangeRetentionDto, CheckDto, StorageDto } from './dto/storage.dto.js';
import { RetentionSettings } from './retention-settings.service.js';
import { StorageReport } from './storage-report.service.js';
import { StorageService } from './storage.service.js';

/** The data folder: what it holds, how long it is kept, backups. For administrators. */
@ApiTags('storage')
@ApiBearerAuth()
@Controller('storage')
export class StorageController {
  constructor(
    private readonly storage: StorageService,
    private readonly report: StorageReport,
    private readonly settings: RetentionSettings,
    @InjectDataSource() private readonly dataSource: DataSource,
  ) {}

  @Get()
  @ApiOkResponse({ type: StorageDto })
  async get(@CurrentUser() user: SignedInUser): Promise<StorageDto> {
    requireAdministrator(user);
    return this.report.make(await this.mayChangeRetention(user));
  }

  /** How long each resolution is kept. It deletes data of every site, so who changes it administers every site. */
  @Patch('retention')
  @ApiOkResponse({ type: StorageDto })
  async change(@Body() body: ChangeRetentionDto, @CurrentUser() user: SignedInUser): Promise<StorageDto> {
    requireAdministrator(user);
    if (!(await this.mayChangeRetention(user)))
      throw new ForbiddenException('How long data are kept is for who administers every site');
    await this.settings.change(body, user);
    return this.get(user);
  }

  /** Measures every table; the outcome is in the next reports. */
  @Post('measurements')
  @HttpCode(202)
  @ApiAcceptedResponse({ type: StorageDto })
  measure(@CurrentUser() user: SignedInUser): Promise<StorageDto> {
    requireAdministrator(user);
    this.storage.beginMeasuring();
    return this.get(user);
  }

  /** Begins a backup; its progress is in the next reports. */
  @Post('backups')
  @HttpCode(202)
  @ApiAcceptedResponse({ type: StorageDto })
  async backUp(@CurrentUser() user: SignedInUser): Promise<StorageDto> {
    requireAdministrator(user);
    await this.storage.beginBackup(user);
    return this.get(user);
  }

  /** Begins to read every page of the database or of a backup; the outcome is in the next reports. */
  @Post('checks')
  @HttpCode(202)
  @ApiAcceptedResponse({ type: StorageDto })
  check(@Body() { subject }: CheckDto, @CurrentUser() user: SignedInUser): Promise<StorageDto> {
    requireAdministrator(user);
    this.storage.beginCheck(subject);
    return this.get(user);
  }

  private async mayChangeRetention(user: SignedInUser): Promise<boolean> {
    const sites = await this.dataSource.getRepository(Site).find({ select: { id: true } });
    const administered = sitesOf(user, 'storage.manage');
    return sites.every(({ id }) => administered.includes(id));
  }
}

function requireAdministrator(user: SignedInUser): void {
  if (sitesOf(user, 'storage.manage').length === 0)
    throw new ForbiddenException('Storage is for administrators');
}
