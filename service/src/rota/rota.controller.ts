import {
  Body,
  Controller,
  Delete,
  Get,
  HttpCode,
  Param,
  ParseIntPipe,
  Post,
  Put,
  Query,
} from '@nestjs/common';
import {
  ApiBearerAuth,
  ApiCreatedResponse,
  ApiNoContentResponse,
  ApiOkResponse,
  ApiTags,
} from '@nestjs/swagger';
import { CurrentUser } from '../auth/current-user.decorator.js';
import type { SignedInUser } from '../auth/signed-in-user.js';
import {
  AddNoteDto,
  AddOverrideDto,
  NoteDto,
  NotesDto,
  NotesQueryDto,
  RotaDto,
  RotaQueryDto,
  SetRotationDto,
  SitesOnCallDto,
} from './dto/rota.dto.js';
import { RotaService, type RotaView } from './rota.service.js';

@ApiTags('Rota')
@ApiBearerAuth()
@Controller('rota')
export class RotaController {
  constructor(private readonly rota: RotaService) {}

  @Get()
  @ApiOkResponse({ type: RotaDto })
  async view(@CurrentUser() user: SignedInUser, @Query() { siteId }: RotaQueryDto): Promise<RotaDto> {
    return rotaDto(await this.rota.view(user, siteId, new Date()));
  }

  @Get('on-call')
  @ApiOkResponse({ type: SitesOnCallDto })
  async onCall(@CurrentUser() user: SignedInUser): Promise<SitesOnCallDto> {
    const items = await this.rota.onCallEverywhere(user, new Date());
    return {
      items: items.map(({ site, onCall }) => ({
        siteId: site.id,
        siteName: site.name,
        timeZone: site.timeZone,
        userId: onCall?.userId ?? null,
        name: onCall?.name ?? null,
        until: onCall?.until.toISOString() ?? null,
      })),
      nextCursor: null,
    };
  }

  @Put(':siteId')
  @ApiOkResponse({ type: RotaDto })
  async setRotation(
    @CurrentUser() user: SignedInUser,
    @Param('siteId', ParseIntPipe) siteId: number,
    @Body() { members, handOverTime, rotationDays, startDate }: SetRotationDto,
  ): Promise<RotaDto> {
    await this.rota.setLayer(user, siteId, { memberIds: members, handOverTime, rotationDays, startDate });
    return rotaDto(await this.rota.view(user, siteId, new Date()));
  }

  /** Somebody stands in: the answer is the rota as it is then. */
  @Post(':siteId/overrides')
  @ApiCreatedResponse({ type: RotaDto })
  async addOverride(
    @CurrentUser() user: SignedInUser,
    @Param('siteId', ParseIntPipe) siteId: number,
    @Body() { userId, from, to, reason }: AddOverrideDto,
  ): Promise<RotaDto> {
    await this.rota.addOverride(user, siteId, { userId, from: new Date(from), to: new Date(to), reason });
    return rotaDto(await this.rota.view(user, siteId, new Date()));
  }

  @Delete(':siteId/overrides/:id')
  @HttpCode(204)
  @ApiNoContentResponse()
  async removeOverride(
    @CurrentUser() user: SignedInUser,
    @Param('siteId', ParseIntPipe) siteId: number,
    @Param('id', ParseIntPipe) id: number,
  ): Promise<void> {
    await this.rota.removeOverride(user, siteId, id);
  }

  @Get(':siteId/notes')
  @ApiOkResponse({ type: NotesDto })
  async notes(
    @CurrentUser() user: SignedInUser,
    @Param('siteId', ParseIntPipe) siteId: number,
    @Query() { limit, cursor }: NotesQueryDto,
  ): Promise<NotesDto> {
    const { items, nextCursor } = await this.rota.notes(user, siteId, { limit, beforeId: cursor });
    return {
      items: items.map(({ id, at, user: by, text }) => ({ id, at: at.toISOString(), by: by.name, text })),
      nextCursor,
    };
  }

  @Post(':siteId/notes')
  @ApiCreatedResponse({ type: NoteDto })
  async addNote(
    @CurrentUser() user: SignedInUser,
    @Param('siteId', ParseIntPipe) siteId: number,
    @Body() body: AddNoteDto,
  ): Promise<NoteDto> {
    const { id, at, text } = await this.rota.addNote(user, siteId, body.text);
    return { id, at: at.toISOString(), by: user.name, text };
  }
}

function rotaDto({ site, layer, overrides, shifts, gaps, onCall, people }: RotaView): RotaDto {
  const nameOf = (id: number) => people.get(id)?.name ?? `Person ${id}`;
  const span = ({ from, to }: { from: Date; to: Date }) => ({
    from: from.toISOString(),
    to: to.toISOString(),
  });
  return {
    siteId: site.id,
    timeZone: site.timeZone,
    layer: layer && {
      members: layer.memberIds.map((userId) => ({ userId, name: nameOf(userId) })),
      handOverTime: layer.handOverTime,
      rotationDays: layer.rotationDays,
      startDate: layer.startDate,
    },
    overrides: overrides.map(({ id, userId, from, to, reason }) => ({
      id,
      userId,
      name: nameOf(userId),
      ...span({ from, to }),
      reason,
    })),
    shifts: shifts.map((shift) => ({
      ...span(shift),
      userId: shift.userId,
      name: nameOf(shift.userId),
      override: shift.override,
    })),
    onCall: onCall && { ...onCall, until: onCall.until.toISOString() },
    gaps: gaps.map(span),
  };
}
