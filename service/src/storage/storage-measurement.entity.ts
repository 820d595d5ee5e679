import { Column, Entity, PrimaryColumn } from 'typeorm';

/** What one table, or the folder of captures, held at one time: growth is worked out from these. */
@Entity({ withoutRowid: true })
export class StorageMeasurement {
  /** s since the Unix epoch */
  @PrimaryColumn()
  t: number;

  /** A table's name, or `CAPTURE_FILES`. */
  @PrimaryColumn()
  name: string;

  @Column()
  rows: number;

  /** Of the pages of the table and its indices, or of the files. */
  @Column()
  bytes: number;

  /** Time of the oldest row of tables that are kept for a time, s since the Unix epoch. */
  @Column({ type: 'real', nullable: true })
  oldest: number | null;
}
