import { BadRequestException, ConflictException, ForbiddenException, Injectable } from '@nestjs/common';
import { EventEmitter2 } from '@nestjs/event-emitter';
import { InjectDataSource } from '@nestjs/typeorm';
import { In, type DataSource, type EntityTarget, type ObjectLiteral } from 'typeorm';
import { AuditService } from '../audit/audit.service.js';
import { hashOfToken, newToken } from '../auth/passwords.js';
import { mayRegisterSites, requireRole, sitesOf, type SignedInUser } from '../auth/signed-in-user.js';
import { Transactions } from '../database/transactions.js';
import { tell } from '../events.js';
import { UserRole } from '../people/user-role.entity.js';
import { IntakeService } from '../telemetry/intake.service.js';
import type { CreateGatewayDto, CreateMachineDto, CreateSiteDto } from './dto/site.dto.js';
import { Gateway } from './gateway.entity.js';
import { Machine } from './machine.entity.js';
import { Site } from './site.entity.js';

/** Sites, their machines and their gateways. */
@Injectable()
export class SitesService {
  constructor(
    @InjectDataSource() private readonly dataSource: DataSource,
    private readonly transactions: Transactions,
    private readonly audit: AuditService,
    private readonly intake: IntakeService,
    private readonly emitter: EventEmitter2,
  ) {}

  sites(user: SignedInUser): Promise<Site[]> {
    return this.dataSource
      .getRepository(Site)
      .find({ where: { id: In(sitesOf(user)) }, order: { name: 'ASC' } });
  }

  machines(user: SignedInUser, siteId?: number): Promise<Machine[]> {
    return this.ofSites(Machine, user, siteId);
  }

  gateways(user: SignedInUser, siteId?: number): Promise<Gateway[]> {
    return this.ofSites(Gateway, user, siteId);
  }

  private ofSites<T extends ObjectLiteral & { name: string; siteId: number }>(
    entity: EntityTarget<T>,
    user: SignedInUser,
    siteId?: number,
  ): Promise<T[]> {
    return this.dataSource
      .getRepository(entity)
      .createQueryBuilder('thing')
      .where('thing.siteId IN (:...sites)', {
        sites: [-1, ...sitesOf(user).filter((id) => siteId === undefined || id === siteId)],
      })
      .orderBy('thing.name')
      .getMany();
  }

  /** A new site; its maker becomes its administrator. */
  async createSite(body: CreateSiteDto, user: SignedInUser): Promise<Site> {
    if (!mayRegisterSites(user)) throw new ForbiddenException('Only administrators may register sites');
    const site = await this.transactions.run(async (manager) => {
      if (await manager.existsBy(Site, { name: body.name }))
        throw new ConflictException(`There is already a site "${body.name}"`);
      const saved = await manager.save(Site, { name: body.name, timeZone: body.timeZone });
      await manager.save(UserRole, { userId: user.id, siteId: saved.id, role: 'administrator' });
      await this.audit.record(manager, {
        user,
        action: 'site.registered',
        subject: { type: 'site', id: saved.id },
        siteId: saved.id,
        after: { ...body },
      });
      return saved;
    });
    tell(this.emitter, 'person.changed', { userId: user.id });
    return site;
  }

  async createMachine(body: CreateMachineDto, user: SignedInUser): Promise<Machine> {
    await this.requireSite(body.siteId, user, 'machine.register');
    return this.transactions.run(async (manager) => {
      if (await manager.existsBy(Machine, { siteId: body.siteId, name: body.name }))
        throw new ConflictException(`The site already has a machine "${body.name}"`);
      const machine = await manager.save(Machine, { siteId: body.siteId, name: body.name });
      await this.audit.record(manager, {
        user,
        action: 'machine.registered',
        subject: { type: 'machine', id: machine.id },
        siteId: body.siteId,
        after: { ...body },
      });
      return machine;
    });
  }

  /** A new gateway and its token, which is shown this once. */
  async createGateway(body: CreateGatewayDto, user: SignedInUser): Promise<{ id: number; token: string }> {
    await this.requireSite(body.siteId, user, 'gateway.register');
    const token = newToken();
    const gateway = await this.transactions.run(async (manager) => {
      if (await manager.existsBy(Gateway, { siteId: body.siteId, name: body.name }))
        throw new ConflictException(`The site already has a gateway "${body.name}"`);
      const saved = await manager.save(Gateway, {
        siteId: body.siteId,
        name: body.name,
        tokenHash: hashOfToken(token),
        epoch: null,
        lastSeenAt: null,
      });
      await this.audit.record(manager, {
        user,
        action: 'gateway.registered',
        subject: { type: 'gateway', id: saved.id },
        siteId: body.siteId,
        after: { name: body.name },
      });
      return saved;
    });
    this.intake.progress(gateway);
    return { id: gateway.id, token };
  }

  private async requireSite(
    siteId: number,
    user: SignedInUser,
    action: 'machine.register' | 'gateway.register',
  ): Promise<void> {
    if (!(await this.dataSource.getRepository(Site).existsBy({ id: siteId })))
      throw new BadRequestException({ errors: [{ path: 'siteId', message: 'is no site' }] });
    requireRole(user, siteId, action, `site ${siteId}`);
  }
}
