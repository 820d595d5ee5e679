import { Column, Entity, JoinColumn, ManyToOne, PrimaryGeneratedColumn, Index, type Relation } from 'typeorm';
import { Site } from '../fleet/site.entity.js';

/** An item that a site's administrator has added to the checklist of applying. Taken off, it stays for the record. */
@Entity()
@Index(['siteId'])
export class SiteChecklistItem {
  @PrimaryGeneratedColumn()
  id: number;

  @Column()
  siteId: number;

  @ManyToOne(() => Site, { nullable: false })
  @JoinColumn({ name: 'siteId' })
  site: Relation<Site>;

  @Column()
  text: string;

  /** Place in the list; null once it was taken off. */
  @Column({ type: 'integer', nullable: true })
  place: number | null;
}
