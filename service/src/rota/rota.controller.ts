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
  AskSwapDto,
  NoteDto,
  NotesDto,
  NotesQueryDto,
  RotaDto,
  RotaQueryDto,
  SetLayersDto,
  SitesOnCallDto,
} from './dto/rota.dto.js';
import { HandOverNotesService } from './hand-over-notes.service.js';
import { OverridesService } from './overrides.service.js';
import type { RotaSwap } from './rota-swap.entity.js';
import { RotaService, type RotaView } from './rota.service.js';
import { SwapsService, type SwapAnswer } from './swaps.service.js';

@ApiTags('Rota')
@ApiBearerAuth()
@Controller('rota')
export class RotaController {
  constructor(
    private readonly rota: RotaService,
    private readonly overrides: OverridesService,
    private readonly swaps: SwapsService,
    private readonly notesOfSite: HandOverNotesService,
  ) {}

  @Get()
  @ApiOkResponse({ type: RotaDto })
  view(@CurrentUser() user: SignedInUser, @Query() { siteId }: RotaQueryDto): Promise<RotaDto> {
    return this.now(user, siteId);
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

  /** Sets the layers of a site in the place of those that it had. */
  @Put(':siteId')
  @ApiOkResponse({ type: RotaDto })
  async setLayers(
    @CurrentUser() user: SignedInUser,
    @Param('siteId', ParseIntPipe) siteId: number,
    @Body() { layers }: SetLayersDto,
  ): Promise<RotaDto> {
    await this.rota.setLayers(
      user,
      siteId,
      layers.map(({ members, ...layer }) => ({ ...layer, memberIds: members })),
    );
    return this.now(user, siteId);
  }

  /** Somebody stands in: the answer is the rota as it is then. */
  @Post(':siteId/overrides')
  @ApiCreatedResponse({ type: RotaDto })
  async addOverride(
    @CurrentUser() user: SignedInUser,
    @Param('siteId', ParseIntPipe) siteId: number,
    @Body() { userId, from, to, reason }: AddOverrideDto,
  ): Promise<RotaDto> {
    await this.overrides.add(user, siteId, { userId, from: new Date(from), to: new Date(to), reason });
    return this.now(user, siteId);
  }

  @Delete(':siteId/overrides/:id')
  @HttpCode(204)
  @ApiNoContentResponse()
  async removeOverride(
    @CurrentUser() user: SignedInUser,
    @Param('siteId', ParseIntPipe) siteId: number,
    @Param('id', ParseIntPipe) id: number,
  ): Promise<void> {
    await this.overrides.remove(user, siteId, id);
  }

  /** Asks somebody to take over; nothing changes before they accept. */
  @Post(':siteId/swaps')
  @ApiCreatedResponse({ type: RotaDto })
  async askSwap(
    @CurrentUser() user: SignedInUser,
    @Param('siteId', ParseIntPipe) siteId: number,
    @Body() { askedOfId, from, to, returnFrom, returnTo, reason }: AskSwapDto,
  ): Promise<RotaDto> {
    await this.swaps.ask(user, siteId, {
      askedOfId,
      give: { from: new Date(from), to: new Date(to) },
      take: returnFrom && returnTo ? { from: new Date(returnFrom), to: new Date(returnTo) } : null,
      reason,
    });
    return this.now(user, siteId);
  }

  @Post(':siteId/swaps/:id/accept')
  @HttpCode(200)
  @ApiOkResponse({ type: RotaDto })
  acceptSwap(
    @CurrentUser() user: SignedInUser,
    @Param('siteId', ParseIntPipe) siteId: number,
    @Param('id', ParseIntPipe) id: number,
  ): Promise<RotaDto> {
    return this.answerSwap(user, siteId, id, 'accepted');
  }

  @Post(':siteId/swaps/:id/decline')
  @HttpCode(200)
  @ApiOkResponse({ type: RotaDto })
  declineSwap(
    @CurrentUser() user: SignedInUser,
    @Param('siteId', ParseIntPipe) siteId: number,
    @Param('id', ParseIntPipe) id: number,
  ): Promise<RotaDto> {
    return this.answerSwap(user, siteId, id, 'declined');
  }

  @Post(':siteId/swaps/:id/withdraw')
  @HttpCode(200)
  @ApiOkResponse({ type: RotaDto })
  withdrawSwap(
    @CurrentUser() user: SignedInUser,
    @Param('siteId', ParseIntPipe) siteId: number,
    @Param('id', ParseIntPipe) id: number,
  ): Promise<RotaDto> {
    return this.answerSwap(user, siteId, id, 'withdrawn');
  }

  @Get(':siteId/notes')
  @ApiOkResponse({ type: NotesDto })
  async notes(
    @CurrentUser() user: SignedInUser,
    @Param('siteId', ParseIntPipe) siteId: number,
    @Query() { limit, cursor }: NotesQueryDto,
  ): Promise<NotesDto> {
    const { items, nextCursor } = await this.notesOfSite.list(user, siteId, { limit, beforeId: cursor });
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
    const { id, at, text } = await this.notesOfSite.add(user, siteId, body.text);
    return { id, at: at.toISOString(), by: user.name, text };
  }

  private async answerSwap(
    user: SignedInUser,
    siteId: number,
    id: number,
    answer: SwapAnswer,
  ): Promise<RotaDto> {
    await this.swaps.answer(user, siteId, id, answer);
    return this.now(user, siteId);
  }

  private async now(user: SignedInUser, siteId: number): Promise<RotaDto> {
    const now = new Date();
    return rotaDto(await this.rota.view(user, siteId, now), await this.swaps.open(siteId, now));
  }
}

const span = ({ from, to }: { from: Date; to: Date }) => ({
  from: from.toISOString(),
  to: to.toISOString(),
});

function rotaDto(
  { site, layers, overrides, shifts, gaps, onCall, people, available }: RotaView,
  swaps: RotaSwap[],
): RotaDto {
  const nameOf = (id: number) => people.get(id)?.name ?? `Person ${id}`;
  const member = (userId: number) => ({ userId, name: nameOf(userId) });
  return {
    siteId: site.id,
    timeZone: site.timeZone,
    layers: layers.map(
      ({ name, memberIds, handOverTime, rotationDays, startDate, endDate, weekdays, hours }) => ({
        name,
        members: memberIds.map(member),
        handOverTime,
        rotationDays,
        startDate,
        endDate,
        weekdays,
        hours,
      }),
    ),
    overrides: overrides.map(({ id, userId, from, to, reason }) => ({
      id,
      ...member(userId),
      ...span({ from, to }),
      reason,
    })),
    swaps: swaps.map(({ id, askedBy, askedOf, from, to, returnFrom, returnTo, reason }) => ({
      id,
      askedBy: { userId: askedBy.id, name: askedBy.name },
      askedOf: { userId: askedOf.id, name: askedOf.name },
      ...span({ from, to }),
      inReturn: returnFrom && returnTo ? span({ from: returnFrom, to: returnTo }) : null,
      reason,
    })),
    available: [...available.values()]
      .map(({ id, name }) => ({ userId: id, name }))
      .sort((a, b) => a.name.localeCompare(b.name)),
    shifts: shifts.map((shift) => ({
      ...span(shift),
      ...member(shift.userId),
      override: shift.override,
      layer: shift.layer,
    })),
    onCall: onCall && { ...onCall, until: onCall.until.toISOString() },
    gaps: gaps.map(span),
  };
}
