import { Column, Entity, Index, JoinColumn, ManyToOne, PrimaryGeneratedColumn, type Relation } from 'typeorm';
import { Site } from '../fleet/site.entity.js';

/** A rotation of a site: its members take turns, in this order, at the times in which the layer holds. */
@Entity()
@Index(['siteId', 'position'], { unique: true })
export class RotaLayer {
  @PrimaryGeneratedColumn()
  id: number;

  @Column()
  siteId: number;

  @ManyToOne(() => Site, { nullable: false })
  @JoinColumn({ name: 'siteId' })
  site: Relation<Site>;

  /** 0 is the lowest; a higher one counts where two hold at once. */
  @Column({ default: 0 })
  position: number;

  @Column({ default: 'Rotation' })
  name: string;

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

  /** YYYY-MM-DD: the last turn ends at hand-over on this day. */
  @Column({ type: 'text', nullable: true })
  endDate: string | null;

  /** ISO 8601: Monday is 1, Sunday is 7. */
  @Column('simple-json', { default: '[1,2,3,4,5,6,7]' })
  weekdays: number[];

  /** HH:mm on the site's clock; null for the whole day. */
  @Column('simple-json', { nullable: true })
  hours: { from: string; to: string } | null;
}
