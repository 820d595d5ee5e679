import type { Database } from 'better-sqlite3';
import type { DataSourceOptions } from 'typeorm';
import { AlertRule } from '../alerts/alert-rule.entity.js';
import { AlertTimer } from '../alerts/alert-timer.entity.js';
import { Alert, AlertEvent } from '../alerts/alert.entity.js';
import { ServedAxis } from '../alerts/served-axis.entity.js';
import { AuditEntry } from '../audit/audit-entry.entity.js';
import { RefreshToken } from '../auth/refresh-token.entity.js';
import { Capture } from '../captures/capture.entity.js';
import { Axis } from '../fleet/axis.entity.js';
import { Gateway } from '../fleet/gateway.entity.js';
import { Machine } from '../fleet/machine.entity.js';
import { Site } from '../fleet/site.entity.js';
import { TuningRevision } from '../fleet/tuning-revision.entity.js';
import { IndicatorHour, IndicatorMinute, IndicatorSecond } from '../indicators/indicator-rollup.entity.js';
import { MoveRecord } from '../indicators/move-record.entity.js';
import { PlantEstimateRow } from '../indicators/plant-estimate.entity.js';
import { AcknowledgeLink } from '../notifications/acknowledge-link.entity.js';
import { Mail } from '../notifications/mail.entity.js';
import { PushSubscription } from '../notifications/push-subscription.entity.js';
import { Invitation } from '../people/invitation.entity.js';
import { UserRole } from '../people/user-role.entity.js';
import { User } from '../people/user.entity.js';
import { Proposal, ProposalEvent, ProposalVersion } from '../proposals/proposal.entity.js';
import { SiteChecklistItem } from '../proposals/site-checklist.entity.js';
import { CalendarFeed } from '../rota/calendar-feed.entity.js';
import { HandoverNote } from '../rota/handover-note.entity.js';
import { RotaLayer } from '../rota/rota-layer.entity.js';
import { RotaOverride } from '../rota/rota-override.entity.js';
import { RotaSwap } from '../rota/rota-swap.entity.js';
import { IntegrityCheck } from '../storage/integrity-check.entity.js';
import { RetentionSetting } from '../storage/retention-setting.entity.js';
import { StorageMeasurement } from '../storage/storage-measurement.entity.js';
import { AxisCheckpoint } from '../telemetry/axis-checkpoint.entity.js';
import { Fleet1764547200000 } from './migrations/1764547200000-fleet.js';
import { People1764547201000 } from './migrations/1764547201000-people.js';
import { Captures1764634000000 } from './migrations/1764634000000-captures.js';
import { CheckpointParts1764635000100 } from './migrations/1764635000100-checkpoint-parts.js';
import { ChangesAtMachines1764637000100 } from './migrations/1764637000100-changes-at-machines.js';
import { ProposalVersions1764637000200 } from './migrations/1764637000200-proposal-versions.js';
import { AlertLifeCycle1764736000100 } from './migrations/1764736000100-alert-life-cycle.js';
import { RotaLayers1764738000100 } from './migrations/1764738000100-rota-layers.js';
import { OutboxAttempts1764738000200 } from './migrations/1764738000200-outbox-attempts.js';
import { Storage1764737500100 } from './migrations/1764737500100-storage.js';
import { NotificationChoices1764738000300 } from './migrations/1764738000300-notification-choices.js';

export const ENTITIES = [
  Site,
  Machine,
  Gateway,
  Axis,
  TuningRevision,
  IndicatorSecond,
  IndicatorMinute,
  IndicatorHour,
  MoveRecord,
  PlantEstimateRow,
  AxisCheckpoint,
  AlertRule,
  Alert,
  AlertEvent,
  AlertTimer,
  ServedAxis,
  Proposal,
  ProposalEvent,
  ProposalVersion,
  SiteChecklistItem,
  User,
  UserRole,
  Invitation,
  RefreshToken,
  AuditEntry,
  RotaLayer,
  RotaOverride,
  RotaSwap,
  CalendarFeed,
  HandoverNote,
  Mail,
  AcknowledgeLink,
  PushSubscription,
  Capture,
  RetentionSetting,
  StorageMeasurement,
  IntegrityCheck,
];

/** The one SQLite file: write-ahead log, foreign keys on, schema by migrations only. */
export function dataSourceOptions(database: string): DataSourceOptions {
  return {
    type: 'better-sqlite3',
    database,
    enableWAL: true,
    prepareDatabase: (db: Database) => {
      db.pragma('synchronous = NORMAL');
      db.pragma('foreign_keys = ON');
      // Only another program can hold a lock. Waiting for it stops the intake too, so it is short: background work
      // tries again at its next beat.
      db.pragma('busy_timeout = 50');
      // 32 MiB of log before its pages go into the file: a fleet's checkpoint rewrites the same pages every second.
      db.pragma('wal_autocheckpoint = 8192');
      // A long reader, such as an integrity check, lets the log grow; when it is gone the file shrinks to this again.
      db.pragma(`journal_size_limit = ${64 * 2 ** 20}`);
    },
    entities: ENTITIES,
    migrations: [
      Fleet1764547200000,
      People1764547201000,
      Captures1764634000000,
      CheckpointParts1764635000100,
      ChangesAtMachines1764637000100,
      ProposalVersions1764637000200,
      AlertLifeCycle1764736000100,
      RotaLayers1764738000100,
      OutboxAttempts1764738000200,
      Storage1764737500100,
      NotificationChoices1764738000300,
    ],
    migrationsRun: true,
    synchronize: false,
  };
}
