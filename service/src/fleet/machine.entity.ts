import {
  Column,
  Entity,
  JoinColumn,
  ManyToOne,
  PrimaryGeneratedColumn,
  Unique,
  type Relation,
} from 'typeorm';
import { Site } from './site.entity.js';

@Entity()
@Unique(['siteId', 'name'])
export class Machine {
  @PrimaryGeneratedColumn()
  id: number;

  @Column()
  siteId: number;

  @ManyToOne(() => Site, { nullable: false })
  @JoinColumn({ name: 'siteId' })
  site: Relation<Site>;

  @Column()
  name: string;
}
