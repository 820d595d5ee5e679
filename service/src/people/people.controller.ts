import { Body, Controller, Delete, Get, HttpCode, Param, ParseIntPipe, Patch, Post } from '@nestjs/common';
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
  ChangePersonDto,
  InvitationDto,
  InvitationsDto,
  InviteDto,
  PeopleDto,
  PersonDto,
} from './dto/people.dto.js';
import type { Invitation } from './invitation.entity.js';
import { InvitationService, requireOwnSites } from './invitation.service.js';
import { PeopleService, type PersonView } from './people.service.js';

const personDto = (person: PersonView): PersonDto => ({
  ...person,
  lastSignInAt: person.lastSignInAt?.toISOString() ?? null,
});

const invitationDto = ({ id, email, name, roles, expiresAt }: Invitation): InvitationDto => ({
  id,
  email: email ?? '',
  name,
  roles,
  expiresAt: expiresAt.toISOString(),
});

@ApiTags('People')
@ApiBearerAuth()
@Controller('people')
export class PeopleController {
  constructor(
    private readonly people: PeopleService,
    private readonly invitations: InvitationService,
  ) {}

  @Get()
  @ApiOkResponse({ type: PeopleDto })
  async list(@CurrentUser() user: SignedInUser): Promise<PeopleDto> {
    return { items: (await this.people.list(user)).map(personDto), nextCursor: null };
  }

  /** Mails a link by which the person makes an account. */
  @Post('invitations')
  @ApiCreatedResponse({ type: InvitationDto })
  async invite(@CurrentUser() user: SignedInUser, @Body() body: InviteDto): Promise<InvitationDto> {
    return invitationDto(await this.invitations.invite(user, body));
  }

  @Get('invitations')
  @ApiOkResponse({ type: InvitationsDto })
  async openInvitations(@CurrentUser() user: SignedInUser): Promise<InvitationsDto> {
    requireOwnSites(user, []);
    return { items: (await this.invitations.open(user)).map(invitationDto), nextCursor: null };
  }

  @Delete('invitations/:id')
  @HttpCode(204)
  @ApiNoContentResponse()
  async withdraw(@CurrentUser() user: SignedInUser, @Param('id', ParseIntPipe) id: number): Promise<void> {
    requireOwnSites(user, []);
    await this.invitations.revoke(user, id);
  }

  @Patch(':id')
  @ApiOkResponse({ type: PersonDto })
  async change(
    @CurrentUser() user: SignedInUser,
    @Param('id', ParseIntPipe) id: number,
    @Body() body: ChangePersonDto,
  ): Promise<PersonDto> {
    return personDto(await this.people.change(user, id, body));
  }
}
