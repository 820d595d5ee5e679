import { Column, Entity, JoinColumn, ManyToOne, PrimaryGeneratedColumn, type Relation } from 'typeorm';
import { Site } from '../fleet/site.entity.js';

/** A site's rotation: its members take turns, in this order. */
@Entity()
export class RotaLayer {
  @PrimaryGeneratedColumn()
  id: number;

  @Column({ unique: true })
  siteId: number;

  @ManyToOne(() => Site, { nullable: false })
  @JoinColumn({ name: 'siteId' })
  site: Relation<Site>;

  @Column('simple-json')
  memberIds: number[];

  /** HH:mm on the site's clock. */
  @Column()
  handOverTime: string;

  /** Days that one turn lasts. */
  @Column()
  rotationDays: number;

  /** YYYY-MM-DD on the site's calendar: the first member's first turn begins at hand-over on this day. */
  @Column()
  startDate: string;
}
