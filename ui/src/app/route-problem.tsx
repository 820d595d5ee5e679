import { Button } from '@mantine/core';
import { Link, useRouteError } from 'react-router-dom';

export function NotFound() {
  return (
    <div className="card" style={{ maxWidth: 520 }}>
      <title>Not found · Polewright</title>
      <h1>There is no such page</h1>
      <p className="soft">The address may be mistyped, or what it led to is gone.</p>
      <Link to="/">To the fleet</Link>
    </div>
  );
}

/** A page that broke says so and offers the way on; most often a newer version has replaced its files. */
export function RouteProblem() {
  const error = useRouteError();
  return (
    <div className="card" role="alert" style={{ maxWidth: 560, margin: '24px auto' }}>
      <title>Problem · Polewright</title>
      <h1>This page could not be shown</h1>
      <p>{error instanceof Error ? error.message : 'Something unexpected happened.'}</p>
      <p className="soft">Nothing was changed on the service. Loading the page again usually helps.</p>
      <Button onClick={() => window.location.reload()}>Load again</Button>
    </div>
  );
}
