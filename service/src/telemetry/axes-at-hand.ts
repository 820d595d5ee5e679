import { Injectable } from '@nestjs/common';
import { InjectDataSource } from '@nestjs/typeorm';
import type { DataSource, EntitySubscriberInterface } from 'typeorm';
import { Axis } from '../fleet/axis.entity.js';

/**
 * All axes with their sites, read again only after an axis was written: who looks at every axis at every beat would
 * otherwise build a thousand entities a second. Take them as they are, do not change them.
 */
@Injectable()
export class AxesAtHand implements EntitySubscriberInterface<Axis> {
  private axes: Promise<readonly Axis[]> | null = null;

  constructor(@InjectDataSource() private readonly dataSource: DataSource) {
    dataSource.subscribers.push(this);
  }

  listenTo(): typeof Axis {
    return Axis;
  }

  all(): Promise<readonly Axis[]> {
    if (!this.axes) {
      const reading = this.dataSource.getRepository(Axis).find({ relations: { site: true } });
      this.axes = reading;
      reading.catch(() => this.axes === reading && this.forget());
    }
    return this.axes;
  }

  afterInsert(): void {
    this.forget();
  }

  afterUpdate(): void {
    this.forget();
  }

  afterRemove(): void {
    this.forget();
  }

  /** What was read on the one connection inside a transaction that was taken back is no longer so. */
  afterTransactionRollback(): void {
    this.forget();
  }

  private forget(): void {
    this.axes = null;
  }
}
