import { Column, CreateDateColumn, Entity, PrimaryGeneratedColumn } from 'typeorm';

/** A plant with its own people, clock and gateways. Sites are independent of each other. */
@Entity()
export class Site {
  @PrimaryGeneratedColumn()
  id: number;

  @Column({ unique: true })
  name: string;

  /** IANA zone name, such as "Europe/London". */
  @Column()
  timeZone: string;

  @CreateDateColumn()
  createdAt: Date;
}
