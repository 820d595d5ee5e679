import { IntervalDto } from '../../fleet/dto/axis-estimate.dto.js';
import { ApiProperty, ApiPropertyOptional } from '@nestjs/swagger';
import { Transform, Type } from 'class-transformer';
import {
  IsBoolean,
  IsDate,
  IsIn,
  IsInt,
  IsNotEmpty,
  IsObject,
  IsOptional,
  IsString,
  MaxLength,
  ValidateNested,
} from 'class-validator';
import { BindingDto } from '../../design/dto/binding.dto.js';
import {
  patternFrequency,
  STRUCTURES,
  type PolePattern,
  type Structure,
} from '../../control/pole-placement.js';
import { PatternDto } from '../../design/dto/pattern.dto.js';
import { AxisEstimateDto, RatioPointDto } from '../../fleet/dto/axis-estimate.dto.js';
import { AxisMoveDto, GainsDto, PlantDto, TolerancesDto } from '../../fleet/dto/axis-sheet.dto.js';
import type { CauseName } from '../../identification/probable-cause.js';
import { NullableNumber, NullableText, NullableTime, PageOf, PageQuery } from '../../page.js';
import { lambdaOf } from '../evidence.js';
import { PROPOSAL_STATES, type Proposal, type ProposalState } from '../proposal.entity.js';
import type { Possibilities } from '../review.service.js';
import { STEPS, type Step } from '../steps.js';
import { ChecklistItemDto } from './checklist.dto.js';

const CAUSES = [
  'load',
  'viscous drag',
  'actuating force',
  'dry friction',
  'offset',
  'one direction',
  'unclear',
];

class DecisionDto {
  @ApiProperty({ enum: ['gain', 'pole'] })
  quantity: 'gain' | 'pole';

  @ApiProperty()
  sentence: string;
}

class EvidenceIndicatorsDto {
  @NullableNumber('mm')
  peakFollowingError: number | null;

  @NullableNumber('mm')
  rmsFollowingError: number | null;

  @NullableNumber('% of moving time')
  saturatedPct: number | null;
}

class EvidenceDto {
  @ApiProperty()
  at: Date;

  @ApiProperty()
  baseline: PlantDto;

  @ApiProperty()
  estimate: AxisEstimateDto;

  @ApiProperty()
  tolerances: TolerancesDto;

  @ApiProperty({ description: 'The axis’s own move' })
  move: AxisMoveDto;

  @ApiProperty({ type: [RatioPointDto] })
  trail: RatioPointDto[];

  @ApiProperty({ type: EvidenceIndicatorsDto, nullable: true })
  indicators: EvidenceIndicatorsDto | null;

  @ApiProperty({ type: [DecisionDto] })
  decisions: DecisionDto[];
}

class AlternativeCauseDto {
  @ApiProperty({ enum: CAUSES })
  name: CauseName;

  @ApiProperty({ description: '0 … 1' })
  confidence: number;
}

class ProbableCauseDto extends AlternativeCauseDto {
  @ApiProperty({ enum: ['up', 'down'] })
  direction: 'up' | 'down';

  @ApiProperty({ description: 'How much the physical quantity changed, %' })
  amountPct: number;

  @ApiProperty({ type: [AlternativeCauseDto], description: 'What else fits' })
  alternatives: readonly AlternativeCauseDto[];

  @ApiProperty({ enum: ['retune', 'inspect first'] })
  advice: 'retune' | 'inspect first';

  @ApiProperty()
  sentence: string;
}

class CurrentTuningDto {
  @ApiProperty()
  revision: number;

  @ApiProperty({ enum: STRUCTURES })
  structure: Structure;

  @ApiProperty({ type: PatternDto, nullable: true })
  pattern: PatternDto | null;

  @NullableNumber('rad/s')
  lambda: number | null;

  @ApiProperty()
  feedForward: boolean;

  @ApiProperty()
  gains: GainsDto;
}

class ProposedDto {
  @ApiProperty({ enum: STRUCTURES })
  structure: Structure;

  @ApiProperty({ type: PatternDto, nullable: true, description: 'null where the gains were given by hand' })
  pattern: PatternDto | null;

  @NullableNumber('rad/s')
  lambda: number | null;

  @ApiProperty()
  feedForward: boolean;

  @ApiProperty()
  gains: GainsDto;
}

class ExpectedTraceDto {
  @ApiProperty({ type: [Number], description: 's' })
  time: number[];

  @ApiProperty({ type: [Number], description: 'Following error, mm' })
  error: number[];

  @ApiProperty({ type: [Number], description: '%' })
  output: number[];
}

class ExpectedFiguresDto {
  @ApiProperty({ description: 'mm' })
  peakFollowingError: number;

  @ApiProperty({ description: 'mm' })
  rmsFollowingError: number;

  @ApiProperty({ description: '%' })
  peakOutput: number;

  @ApiProperty({ description: '% of samples' })
  saturatedPct: number;

  @NullableNumber('Ms with all delays; null where the loop is not stable')
  maxSensitivity: number | null;
}

class ExpectedMoveDto extends ExpectedFiguresDto {
  @ApiProperty()
  trace: ExpectedTraceDto;
}

class ExpectedCornerDto {
  @ApiProperty({ description: '(mm/s)/%' })
  gain: number;

  @ApiProperty({ description: 'rad/s' })
  pole: number;

  @ApiProperty({ description: 'Doing nothing' })
  before: ExpectedFiguresDto;

  @ApiProperty({ type: ExpectedFiguresDto, nullable: true })
  after: ExpectedFiguresDto | null;
}

class ExpectedDto {
  @ApiProperty({ description: 'With the gains of today, on the plant as identified' })
  before: ExpectedMoveDto;

  @ApiProperty({ type: ExpectedMoveDto, nullable: true })
  after: ExpectedMoveDto | null;

  @ApiProperty({
    type: ExpectedFiguresDto,
    nullable: true,
    description: 'Worst corner of the 95 % region, with the new gains',
  })
  worst: ExpectedFiguresDto | null;

  @ApiPropertyOptional({ description: 'The same for doing nothing' })
  worstBefore?: ExpectedFiguresDto;

  @ApiPropertyOptional({ type: [ExpectedCornerDto], description: 'Each corner of the 95 % region' })
  corners?: ExpectedCornerDto[];
}

class ComparedDto {
  @ApiProperty({ description: 'Median' })
  before: number;

  @ApiProperty({ description: 'Median' })
  after: number;

  @ApiProperty({ description: 'Rank test, one-sided: small means worse' })
  pWorse: number;

  @ApiProperty({ description: 'Rank test, one-sided: small means better' })
  pBetter: number;

  @ApiPropertyOptional({
    type: IntervalDto,
    description:
      'After against before, Hodges–Lehmann with its 95 % interval: % of before; of a figure in %, points',
  })
  change?: IntervalDto;
}

class MovesDto {
  @ApiProperty()
  before: number;

  @ApiProperty()
  after: number;
}

class TrialDto {
  @ApiProperty()
  startedAt: Date;

  @ApiProperty({ description: 'Moves of the same kind that were compared' })
  moves: MovesDto;

  @ApiProperty({ type: ComparedDto, nullable: true, description: 'mm' })
  peakFollowingError: ComparedDto | null;

  @ApiProperty({ type: ComparedDto, nullable: true, description: 'mm' })
  rmsFollowingError: ComparedDto | null;

  @ApiProperty({ type: ComparedDto, nullable: true, description: '%' })
  saturatedPct: ComparedDto | null;

  @ApiProperty({ enum: ['waiting', 'better', 'no different', 'worse'] })
  verdict: 'waiting' | 'better' | 'no different' | 'worse';

  @ApiProperty()
  sentence: string;
}

class ProposalEventDto {
  @ApiProperty()
  at: Date;

  @ApiProperty({ description: 'A person’s name, or "service"' })
  by: string;

  @ApiProperty()
  action: string;

  @NullableText()
  note: string | null;

  @ApiProperty()
  version: number;
}

class ProposalVersionDto {
  @ApiProperty()
  version: number;

  @ApiProperty()
  at: Date;

  @ApiProperty({ description: 'A person’s name, or "service"' })
  by: string;

  @ApiProperty({ type: ProposedDto, nullable: true })
  proposed: ProposedDto | null;

  @NullableText()
  note: string | null;
}

export class CommentDto {
  @ApiProperty({ maxLength: 2000 })
  @IsString()
  @Transform(({ value }: { value: unknown }) => (typeof value === 'string' ? value.trim() : value))
  @IsNotEmpty()
  @MaxLength(2000)
  text: string;
}

class NamedPersonDto {
  @ApiProperty()
  id: number;

  @ApiProperty()
  name: string;
}

class WindowDto {
  @ApiProperty()
  from: Date;

  @ApiProperty()
  to: Date;
}

/** A proposal as it stands in a list. */
export class ProposalSummaryDto {
  @ApiProperty()
  id: number;

  @ApiProperty()
  axisId: number;

  @ApiProperty()
  axisTag: string;

  @ApiProperty()
  axisName: string;

  @ApiProperty()
  machineName: string;

  @ApiProperty()
  siteId: number;

  @ApiProperty()
  siteName: string;

  @ApiProperty()
  timeZone: string;

  @ApiProperty({ enum: PROPOSAL_STATES })
  state: ProposalState;

  @ApiProperty()
  version: number;

  @ApiProperty({ enum: ['drift', 'person'] })
  source: 'drift' | 'person';

  @ApiProperty()
  createdAt: Date;

  @ApiProperty({ type: ProbableCauseDto, nullable: true })
  probableCause: ProbableCauseDto | null;

  @ApiProperty({ type: ProposedDto, nullable: true })
  proposed: ProposedDto | null;

  @NullableText('Why no gains are proposed')
  noGainsReason: string | null;

  @ApiProperty({ type: WindowDto, nullable: true })
  window: WindowDto | null;

  @ApiProperty({ type: TrialDto, nullable: true })
  trial: TrialDto | null;
}

export class ProposalDto extends ProposalSummaryDto {
  @ApiProperty()
  evidence: EvidenceDto;

  @ApiProperty()
  current: CurrentTuningDto;

  @ApiProperty({ type: ExpectedDto, nullable: true })
  expected: ExpectedDto | null;

  @ApiProperty({ type: BindingDto, nullable: true })
  binding: BindingDto | null;

  @NullableText()
  note: string | null;

  @ApiProperty({
    type: NamedPersonDto,
    nullable: true,
    description: 'null while it is as the service made it',
  })
  alteredBy: NamedPersonDto | null;

  @ApiProperty({ type: NamedPersonDto, nullable: true })
  submittedBy: NamedPersonDto | null;

  @ApiProperty({ type: NamedPersonDto, nullable: true })
  approvedBy: NamedPersonDto | null;

  @NullableNumber()
  approvedVersion: number | null;

  @NullableNumber('The tuning revision that was sent')
  revision: number | null;

  @NullableTime()
  sentAt: Date | null;

  @NullableTime()
  appliedAt: Date | null;

  @ApiProperty()
  rollingBack: boolean;

  @ApiProperty({ description: 'Whether the machine may run with other gains than the revision says' })
  restoring: boolean;

  @ApiProperty({ type: [ProposalEventDto], description: 'Oldest first' })
  events: ProposalEventDto[];

  @ApiProperty({ type: [ProposalVersionDto], description: 'Oldest first' })
  versions: ProposalVersionDto[];

  @ApiProperty({ type: [ChecklistItemDto], description: 'What apply must confirm' })
  checklist: readonly ChecklistItemDto[];

  @ApiProperty({ enum: STEPS, isArray: true, description: 'What this person may do now' })
  actions: Step[];

  @ApiProperty({
    type: 'object',
    additionalProperties: { type: 'string' },
    description: 'Why not the other steps',
  })
  refusals: Partial<Record<Step, string>>;
}

export class ProposalPageDto extends PageOf(ProposalSummaryDto, 'ProposalPageDto') {}

const withLambda = <T extends { pattern: PolePattern | null }>(tuning: T): T & { lambda: number | null } => ({
  ...tuning,
  lambda: lambdaOf(tuning.pattern),
});

export function summaryOf(proposal: Proposal): ProposalSummaryDto {
  const { axis, windowFrom, windowTo } = proposal;
  return {
    id: proposal.id,
    axisId: proposal.axisId,
    axisTag: axis.tag,
    axisName: axis.name,
    machineName: axis.machine.name,
    siteId: proposal.siteId,
    siteName: axis.site.name,
    timeZone: axis.site.timeZone,
    state: proposal.state,
    version: proposal.version,
    source: proposal.source,
    createdAt: proposal.createdAt,
    probableCause: proposal.probableCause,
    proposed: proposal.proposed && (withLambda(proposal.proposed) as ProposedDto),
    noGainsReason: proposal.noGainsReason,
    window: windowFrom && windowTo ? { from: windowFrom, to: windowTo } : null,
    trial: proposal.trial && { ...proposal.trial, startedAt: new Date(proposal.trial.startedAt) },
  };
}

/** @param names people's names by id */
export function proposalOf(
  proposal: Proposal,
  names: Map<number, string>,
  possibilities: Possibilities,
  checklist: readonly ChecklistItemDto[],
): ProposalDto {
  const person = (id: number | null): NamedPersonDto | null =>
    id === null ? null : { id, name: names.get(id) ?? 'somebody' };
  const { evidence } = proposal;
  return {
    ...summaryOf(proposal),
    evidence: {
      ...evidence,
      at: new Date(evidence.at),
      baseline: { gain: evidence.baseline.gain, pole: evidence.baseline.pole },
      estimate: { ...evidence.estimate, at: new Date(evidence.at) },
    },
    current: {
      ...proposal.current,
      lambda: proposal.current.pattern && patternFrequency(proposal.current.pattern),
    } as CurrentTuningDto,
    expected: proposal.expected,
    binding: proposal.binding,
    note: proposal.note,
    alteredBy: person(proposal.alteredById),
    submittedBy: person(proposal.submittedById),
    approvedBy: person(proposal.approvedById),
    approvedVersion: proposal.approvedVersion,
    revision: proposal.revision,
    sentAt: proposal.sentAt,
    appliedAt: proposal.appliedAt,
    rollingBack: proposal.rollingBack,
    restoring: proposal.restoring,
    events: proposal.events.map(({ at, by, action, note, version }) => ({ at, by, action, note, version })),
    versions: proposal.versions.map(({ version, at, by, proposed, note }) => ({
      version,
      at,
      by,
      proposed: proposed && (withLambda(proposed) as ProposedDto),
      note,
    })),
    checklist,
    ...possibilities,
  };
}

export class ProposalQuery extends PageQuery {
  @ApiPropertyOptional({
    enum: ['open', ...PROPOSAL_STATES],
    description: '"open" is everything that still wants something from somebody',
  })
  @IsOptional()
  @IsIn(['open', ...PROPOSAL_STATES])
  state?: ProposalState | 'open';

  @ApiPropertyOptional()
  @IsOptional()
  @Type(() => Number)
  @IsInt()
  axisId?: number;
}

export class AlterProposalDto {
  @ApiPropertyOptional({ type: PatternDto })
  @IsOptional()
  @IsObject()
  @ValidateNested()
  @Type(() => PatternDto)
  pattern?: PatternDto;

  @ApiPropertyOptional({ enum: STRUCTURES })
  @IsOptional()
  @IsIn(STRUCTURES)
  structure?: Structure;

  @ApiPropertyOptional({ type: GainsDto, description: 'By hand, instead of placing poles' })
  @IsOptional()
  @IsObject()
  @ValidateNested()
  @Type(() => GainsDto)
  gains?: GainsDto;

  @ApiPropertyOptional()
  @IsOptional()
  @IsBoolean()
  feedForward?: boolean;

  @ApiPropertyOptional({ maxLength: 2000 })
  @IsOptional()
  @IsString()
  @MaxLength(2000)
  note?: string;
}

export class CreateProposalDto extends AlterProposalDto {
  @ApiProperty()
  @IsInt()
  axisId: number;
}

export class ReasonDto {
  @ApiProperty({ maxLength: 2000 })
  @IsString()
  @IsNotEmpty()
  @MaxLength(2000)
  reason: string;
}

export class ScheduleDto {
  @ApiProperty()
  @Type(() => Date)
  @IsDate()
  from: Date;

  @ApiProperty()
  @Type(() => Date)
  @IsDate()
  to: Date;
}

export class ApplyDto {
  @ApiProperty({
    type: 'object',
    additionalProperties: { type: 'boolean' },
    description: 'Every item of the checklist, true',
  })
  @IsObject()
  checklist: Record<string, unknown>;

  @ApiProperty({ description: 'Your own password, once more' })
  @IsString()
  @IsNotEmpty()
  @MaxLength(200)
  password: string;
}
