import { useQuery } from '@tanstack/react-query';
import { Link } from 'react-router-dom';
import { answer, client } from '../../api/client';
import { Card } from '../../components/card';
import { SiteTime } from '../../components/site-time';
import type { Axis } from '../fleet/fleet-api';
import { proposalsQuery } from '../proposals/proposals-api';
import classes from './axis-page.module.css';

const LATEST = 12;

/** Alerts and proposals of the axis, newest first. */
export function WhatHappened({ axis }: { axis: Axis }) {
  const alertsOf = (state: 'open' | 'normal') => ({
    queryKey: ['alerts', { axisId: axis.id, state }],
    queryFn: () =>
      answer(client.GET('/api/v1/alerts', { params: { query: { axisId: axis.id, state, limit: LATEST } } })),
  });
  const open = useQuery(alertsOf('open'));
  const over = useQuery(alertsOf('normal'));
  const proposals = useQuery(proposalsQuery({ axisId: axis.id }));
  const entries = [
    ...[...(open.data?.items ?? []), ...(over.data?.items ?? [])].map((alert) => ({
      at: alert.raisedAt,
      to: `/alerts/${alert.id}`,
      what: alert.title,
      state: alert.state === 'normal' ? 'over' : alert.state.replaceAll('-', ' '),
      text: alert.message,
    })),
    ...(proposals.data?.items ?? []).map((proposal) => ({
      at: proposal.createdAt,
      to: `/proposals/${proposal.id}`,
      what: `retune ${proposal.id}`,
      state: proposal.state,
      text: proposal.probableCause?.sentence ?? '',
    })),
  ]
    .sort((a, b) => b.at.localeCompare(a.at))
    .slice(0, LATEST);
  return (
    <Card title="What happened" sub="alerts and proposals, newest first">
      {entries.length === 0 && <p className="soft">Nothing yet.</p>}
      <ol className={classes.list}>
        {entries.map(({ at, to, what, state, text }) => (
          <li key={to}>
            <span className="soft small">
              <SiteTime at={at} timeZone={axis.timeZone} />
            </span>{' '}
            <Link to={to}>{what}</Link> <b style={{ fontWeight: 600 }}>{state}</b>
            <div className="small">{text}</div>
          </li>
        ))}
      </ol>
    </Card>
  );
}
