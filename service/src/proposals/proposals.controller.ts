import {
  BadRequestException,
  Body,
  Controller,
  Get,
  Headers,
  HttpCode,
  Param,
  ParseIntPipe,
  Patch,
  Post,
  Query,
  StreamableFile,
} from '@nestjs/common';
import type { Readable } from 'node:stream';
import {
  ApiBearerAuth,
  ApiCreatedResponse,
  ApiHeader,
  ApiOkResponse,
  ApiProduces,
  ApiTags,
} from '@nestjs/swagger';
import { InjectDataSource } from '@nestjs/typeorm';
import { In, LessThan, type DataSource } from 'typeorm';
import { CurrentUser } from '../auth/current-user.decorator.js';
import { sitesOf, type SignedInUser } from '../auth/signed-in-user.js';
import { AxesService } from '../fleet/axes.service.js';
import { pageOf, type Page } from '../page.js';
import { User } from '../people/user.entity.js';
import { ApplyService } from './apply.service.js';
import { ChecklistService } from './checklist.service.js';
import { DraftingService, type Alteration } from './drafting.service.js';
import {
  AlterProposalDto,
  ApplyDto,
  CommentDto,
  CreateProposalDto,
  ProposalDto,
  proposalOf,
  ProposalPageDto,
  ProposalQuery,
  ProposalSummaryDto,
  ReasonDto,
  ScheduleDto,
  summaryOf,
} from './dto/proposal.dto.js';
import { LIVE_STATES, Proposal } from './proposal.entity.js';
import { proposalReport } from './report/proposal-report.js';
import { ReviewService } from './review.service.js';

/** Refuses the step with 409 when the proposal has another version by now. */
const IF_MATCH = {
  name: 'if-match',
  required: false,
  description: 'The version that you have seen, such as "2"',
};

@ApiTags('proposals')
@ApiBearerAuth()
@Controller('proposals')
export class ProposalsController {
  constructor(
    @InjectDataSource() private readonly dataSource: DataSource,
    private readonly axes: AxesService,
    private readonly drafting: DraftingService,
    private readonly review: ReviewService,
    private readonly applying: ApplyService,
    private readonly checklists: ChecklistService,
  ) {}

  /** Newest first. */
  @Get()
  @ApiOkResponse({ type: ProposalPageDto })
  async list(
    @Query() query: ProposalQuery,
    @CurrentUser() user: SignedInUser,
  ): Promise<Page<ProposalSummaryDto>> {
    const { limit, cursor, state, axisId } = query;
    const before = cursor === undefined ? undefined : Number(cursor);
    if (before !== undefined && !Number.isInteger(before))
      throw new BadRequestException({ errors: [{ path: 'cursor', message: 'is none that this list gave' }] });
    const rows = await this.dataSource.getRepository(Proposal).find({
      where: {
        siteId: In(sitesOf(user)),
        ...(state && { state: state === 'open' ? In([...LIVE_STATES]) : state }),
        ...(axisId !== undefined && { axisId }),
        ...(before !== undefined && { id: LessThan(before) }),
      },
      relations: { axis: { machine: true, site: true } },
      order: { id: 'DESC' },
      take: limit + 1,
    });
    return pageOf(rows, limit, ({ id }) => String(id), summaryOf);
  }

  @Get(':id')
  @ApiOkResponse({ type: ProposalDto })
  async get(@Param('id', ParseIntPipe) id: number, @CurrentUser() user: SignedInUser): Promise<ProposalDto> {
    const proposal = await this.review.get(id, user);
    const people = [proposal.alteredById, proposal.submittedById, proposal.approvedById].filter(
      (p) => p !== null,
    );
    const names = await this.dataSource
      .getRepository(User)
      .find({ select: { id: true, name: true }, where: { id: In(people) } });
    return proposalOf(
      proposal,
      new Map(names.map((person) => [person.id, person.name])),
      this.review.possibilities(proposal, user),
      await this.checklists.of(proposal.siteId),
    );
  }

  /** The proposal on two sides of A4. */
  @Get(':id/report.pdf')
  @ApiProduces('application/pdf')
  @ApiOkResponse({ schema: { type: 'string', format: 'binary' } })
  async report(
    @Param('id', ParseIntPipe) id: number,
    @CurrentUser() user: SignedInUser,
  ): Promise<StreamableFile> {
    const proposal = await this.review.get(id, user);
    const checklist = await this.checklists.of(proposal.siteId);
    // pdfkit's document is a stream of Node's, by its own typings as well.
    return new StreamableFile(proposalReport(proposal, checklist) as unknown as Readable, {
      type: 'application/pdf',
      disposition: `inline; filename="proposal-${id}.pdf"`,
    });
  }

  @Post()
  @ApiCreatedResponse({ type: ProposalDto })
  async create(
    @Body() { axisId, ...wish }: CreateProposalDto,
    @CurrentUser() user: SignedInUser,
  ): Promise<ProposalDto> {
    await this.axes.get(axisId, user, 'proposal.work');
    const { id } = await this.drafting.draft(axisId, 'person', user, wish as Alteration);
    return this.get(id, user);
  }

  @Patch(':id')
  @ApiHeader({ ...IF_MATCH, required: true })
  @ApiOkResponse({ type: ProposalDto })
  async alter(
    @Param('id', ParseIntPipe) id: number,
    @Body() change: AlterProposalDto,
    @CurrentUser() user: SignedInUser,
    @Headers('if-match') ifMatch?: string,
  ): Promise<ProposalDto> {
    await this.review.alter(id, change as Alteration, ifMatch, user);
    return this.get(id, user);
  }

  /** Says something about a proposal. */
  @Post(':id/comments')
  @ApiCreatedResponse({ type: ProposalDto })
  async comment(
    @Param('id', ParseIntPipe) id: number,
    @Body() { text }: CommentDto,
    @CurrentUser() user: SignedInUser,
  ): Promise<ProposalDto> {
    await this.review.comment(id, text, user);
    return this.get(id, user);
  }

  @Post(':id/submit')
  @ApiHeader(IF_MATCH)
  @HttpCode(200)
  @ApiOkResponse({ type: ProposalDto })
  async submit(
    @Param('id', ParseIntPipe) id: number,
    @CurrentUser() user: SignedInUser,
    @Headers('if-match') ifMatch?: string,
  ): Promise<ProposalDto> {
    await this.review.submit(id, ifMatch, user);
    return this.get(id, user);
  }

  @Post(':id/approve')
  @ApiHeader(IF_MATCH)
  @HttpCode(200)
  @ApiOkResponse({ type: ProposalDto })
  async approve(
    @Param('id', ParseIntPipe) id: number,
    @CurrentUser() user: SignedInUser,
    @Headers('if-match') ifMatch?: string,
  ): Promise<ProposalDto> {
    await this.review.approve(id, ifMatch, user);
    return this.get(id, user);
  }

  @Post(':id/decline')
  @ApiHeader(IF_MATCH)
  @HttpCode(200)
  @ApiOkResponse({ type: ProposalDto })
  async decline(
    @Param('id', ParseIntPipe) id: number,
    @Body() { reason }: ReasonDto,
    @CurrentUser() user: SignedInUser,
    @Headers('if-match') ifMatch?: string,
  ): Promise<ProposalDto> {
    await this.review.decline(id, reason, ifMatch, user);
    return this.get(id, user);
  }

  @Post(':id/withdraw')
  @ApiHeader(IF_MATCH)
  @HttpCode(200)
  @ApiOkResponse({ type: ProposalDto })
  async withdraw(
    @Param('id', ParseIntPipe) id: number,
    @CurrentUser() user: SignedInUser,
    @Headers('if-match') ifMatch?: string,
  ): Promise<ProposalDto> {
    await this.review.withdraw(id, ifMatch, user);
    return this.get(id, user);
  }

  @Post(':id/schedule')
  @ApiHeader(IF_MATCH)
  @HttpCode(200)
  @ApiOkResponse({ type: ProposalDto })
  async schedule(
    @Param('id', ParseIntPipe) id: number,
    @Body() { from, to }: ScheduleDto,
    @CurrentUser() user: SignedInUser,
    @Headers('if-match') ifMatch?: string,
  ): Promise<ProposalDto> {
    await this.review.schedule(id, from, to, ifMatch, user);
    return this.get(id, user);
  }

  /** Sends the approved gains to the machine: unexpected motion is possible, see the checklist. */
  @Post(':id/apply')
  @ApiHeader(IF_MATCH)
  @HttpCode(200)
  @ApiOkResponse({ type: ProposalDto })
  async apply(
    @Param('id', ParseIntPipe) id: number,
    @Body() { checklist, password }: ApplyDto,
    @CurrentUser() user: SignedInUser,
    @Headers('if-match') ifMatch?: string,
  ): Promise<ProposalDto> {
    await this.applying.apply(id, checklist, password, ifMatch, user);
    return this.get(id, user);
  }

  @Post(':id/keep')
  @ApiHeader(IF_MATCH)
  @HttpCode(200)
  @ApiOkResponse({ type: ProposalDto })
  async keep(
    @Param('id', ParseIntPipe) id: number,
    @CurrentUser() user: SignedInUser,
    @Headers('if-match') ifMatch?: string,
  ): Promise<ProposalDto> {
    await this.review.keep(id, ifMatch, user);
    return this.get(id, user);
  }

  /** Asks the machine for the former gains again; the axis must be in maintenance and at rest. */
  @Post(':id/roll-back')
  @ApiHeader(IF_MATCH)
  @HttpCode(200)
  @ApiOkResponse({ type: ProposalDto })
  async rollBack(
    @Param('id', ParseIntPipe) id: number,
    @Body() { reason }: ReasonDto,
    @CurrentUser() user: SignedInUser,
    @Headers('if-match') ifMatch?: string,
  ): Promise<ProposalDto> {
    await this.applying.rollBack(id, reason, ifMatch, user);
    return this.get(id, user);
  }
}
