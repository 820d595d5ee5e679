import { Menu, UnstyledButton, useMantineColorScheme } from '@mantine/core';
import { useQuery } from '@tanstack/react-query';
import { Link, NavLink, Outlet, ScrollRestoration, useLocation } from 'react-router-dom';
import { useLiveStatus } from '../api/live';
import { may } from '../api/policy';
import { signOut } from '../api/session';
import { useSession } from '../api/use-session';
import { SiteTime } from '../components/site-time';
import { AxisFinder } from './axis-finder';
import classes from './layout.module.css';
import { Mark } from './mark';
import { onCallQuery, summaryQuery } from './shell-api';

/** Pages that a phone shows at its lower edge; the further ones are in the account's menu there. */
const AT_THE_THUMB = 4;

interface PageLink {
  to: string;
  label: string;
}

export function Layout() {
  const { user } = useSession();
  const { data: summary } = useQuery(summaryQuery);
  const links = [
    { to: '/', label: 'Fleet', count: 0 },
    { to: '/alerts', label: 'Alerts', count: summary?.unacknowledgedAlerts ?? 0 },
    { to: '/proposals', label: 'Proposals', count: summary?.openProposals ?? 0 },
    { to: '/rota', label: 'Rota', count: 0 },
    { to: '/captures', label: 'Captures', count: 0 },
  ];
  const adminLinks = [
    ...(may(user, 'people.manage') ? [{ to: '/admin/people', label: 'People' }] : []),
    { to: '/admin/mail', label: 'Mail' },
    ...(may(user, 'intake.read') ? [{ to: '/admin/intake', label: 'Intake' }] : []),
    ...(may(user, 'storage.manage') ? [{ to: '/admin/storage', label: 'Storage' }] : []),
    ...(may(user, 'audit.read') ? [{ to: '/admin/record', label: 'Record' }] : []),
  ];
  const link = ({ to, label, count }: (typeof links)[number]) => (
    <NavLink key={to} to={to} end={to === '/'} className={({ isActive }) => (isActive ? classes.here : '')}>
      {label}
      {count > 0 && (
        <b>
          {' '}
          {count}
          <span className="visually-hidden"> open</span>
        </b>
      )}
    </NavLink>
  );
  return (
    <div className={classes.shell}>
      <a className="skip-link" href="#content">
        To the content
      </a>
      <header className={`${classes.top} no-print`}>
        <Link to="/" className={classes.word}>
          <Mark /> Polewright
        </Link>
        <nav aria-label="Main" className={classes.nav}>
          {links.map(link)}
          <AdminMenu links={adminLinks} />
        </nav>
        <span style={{ flex: 1 }} />
        <AxisFinder />
        <LiveMark />
        <OnCall />
        <Account further={[...links.slice(AT_THE_THUMB), ...adminLinks]} />
      </header>
      <main id="content" className={classes.main}>
        <Outlet />
      </main>
      <nav aria-label="Main, at the thumb" className={`${classes.thumb} no-print`}>
        {links.slice(0, AT_THE_THUMB).map(link)}
      </nav>
      <ScrollRestoration />
    </div>
  );
}

/** The pages of running the installation, under one word. */
function AdminMenu({ links }: { links: PageLink[] }) {
  const { pathname } = useLocation();
  const here = links.find(({ to }) => pathname.startsWith(to));
  return (
    <Menu position="bottom-start" withinPortal>
      <Menu.Target>
        <UnstyledButton className={`${classes.admin} ${here ? classes.here : ''}`}>
          {here?.label ?? 'Admin'} <span aria-hidden>▾</span>
        </UnstyledButton>
      </Menu.Target>
      <Menu.Dropdown>
        <Menu.Label>Admin</Menu.Label>
        {links.map((link) => (
          <PageItem key={link.to} {...link} />
        ))}
      </Menu.Dropdown>
    </Menu>
  );
}

function PageItem({ to, label, className }: PageLink & { className?: string | undefined }) {
  const { pathname } = useLocation();
  return (
    <Menu.Item
      component={Link}
      to={to}
      {...(className && { className })}
      {...(pathname.startsWith(to) && { 'aria-current': 'page' as const })}
    >
      {label}
    </Menu.Item>
  );
}

/** Says when values stopped coming, and nothing while they come. */
function LiveMark() {
  const { connected, lastAt } = useLiveStatus();
  return (
    <span role="status" className={classes.live}>
      {!connected && lastAt && (
        <span style={{ color: 'var(--out)' }}>
          last update{' '}
          {lastAt.toLocaleTimeString('en-GB', { hour: '2-digit', minute: '2-digit', second: '2-digit' })}
        </span>
      )}
    </span>
  );
}

function OnCall() {
  const { data } = useQuery(onCallQuery);
  if (!data || data.items.length === 0) return null;
  const [first] = data.items;
  const same = data.items.every(({ userId }) => userId === first!.userId);
  return (
    <div className={classes.call}>
      {(same ? [first!] : data.items).map(({ siteId, siteName, name, until, timeZone }) => (
        <div key={siteId} className="nowrap">
          {same ? 'on call ' : `${siteName}: `}
          {name ? (
            <>
              <b>{name}</b>
              {until && (
                <>
                  {' '}
                  until <SiteTime at={until} timeZone={timeZone} />
                </>
              )}
            </>
          ) : (
            <b style={{ color: 'var(--out)' }}>nobody on call</b>
          )}
        </div>
      ))}
    </div>
  );
}

function Account({ further }: { further: PageLink[] }) {
  const { user } = useSession();
  const { colorScheme, setColorScheme } = useMantineColorScheme();
  if (!user) return null;
  const roles = [...new Set(user.roles.map(({ role }) => role))].join(', ');
  return (
    <Menu position="bottom-end" withinPortal>
      <Menu.Target>
        <UnstyledButton className={classes.account} aria-label={`Account of ${user.name}`}>
          {user.name
            .split(' ')
            .map((part) => part[0])
            .join('')}
        </UnstyledButton>
      </Menu.Target>
      <Menu.Dropdown>
        <Menu.Label>
          {user.name}, {roles || 'no role yet'}
        </Menu.Label>
        <Menu.Item component={Link} to="/profile">
          Profile
        </Menu.Item>
        <Menu.Label className={classes.phoneOnly}>Further pages</Menu.Label>
        {further.map((link) => (
          <PageItem key={link.to} {...link} className={classes.phoneOnly} />
        ))}
        <Menu.Label>Scheme</Menu.Label>
        {(['light', 'dark', 'auto'] as const).map((scheme) => (
          <Menu.Item
            key={scheme}
            onClick={() => setColorScheme(scheme)}
            aria-current={colorScheme === scheme}
          >
            {{ light: 'Light paper', dark: 'Dark', auto: 'As the system' }[scheme]}
            {colorScheme === scheme && ' ·'}
          </Menu.Item>
        ))}
        <Menu.Divider />
        <Menu.Item onClick={() => void signOut()}>Sign out</Menu.Item>
      </Menu.Dropdown>
    </Menu>
  );
}
