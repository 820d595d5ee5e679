import { Navigate, Outlet, useLocation } from 'react-router-dom';
import { useSession } from '../api/use-session';

/** Everything behind it needs a signed-in person; where they wanted to go is kept. */
export function SignedIn() {
  const { status } = useSession();
  const location = useLocation();
  if (status === 'opening')
    return <div aria-busy="true" style={{ height: '100dvh', background: 'var(--ground)' }} />;
  if (status === 'signed-out')
    return <Navigate to="/sign-in" replace state={{ from: location.pathname + location.search }} />;
  return <Outlet />;
}
