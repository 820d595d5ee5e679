import { createBrowserRouter } from 'react-router-dom';
import { Layout } from './layout';
import { NotFound, RouteProblem } from './route-problem';
import { SignedIn } from './signed-in';

export const router = createBrowserRouter([
  {
    errorElement: <RouteProblem />,
    children: [
      { path: '/sign-in', lazy: () => import('../features/auth/sign-in-page') },
      { path: '/password-reset', lazy: () => import('../features/auth/password-reset-page') },
      { path: '/invitation/:token', lazy: () => import('../features/people/invitation-page') },
      { path: '/acknowledge/:token', lazy: () => import('../features/alerts/acknowledge-page') },
      {
        element: <SignedIn />,
        children: [
          {
            element: <Layout />,
            children: [
              {
                errorElement: <RouteProblem />,
                children: [
                  { path: '/', lazy: () => import('../features/fleet/fleet-page') },
                  { path: '/axes/:id', lazy: () => import('../features/axis/axis-page') },
                  { path: '/axes/:id/bench', lazy: () => import('../features/bench/bench-page') },
                  { path: '/alerts', lazy: () => import('../features/alerts/alerts-page') },
                  { path: '/alerts/rates', lazy: () => import('../features/on-call/rates-page') },
                  { path: '/alerts/:id', lazy: () => import('../features/alerts/alert-page') },
                  { path: '/proposals', lazy: () => import('../features/proposals/proposals-page') },
                  {
                    path: '/proposals/checklists',
                    lazy: () => import('../features/proposals/checklist-page'),
                  },
                  { path: '/proposals/:id', lazy: () => import('../features/proposals/proposal-page') },
                  { path: '/captures', lazy: () => import('../features/captures/captures-page') },
                  { path: '/captures/:id', lazy: () => import('../features/captures/capture-page') },
                  { path: '/rota', lazy: () => import('../features/rota/rota-page') },
                  {
                    path: '/rota/:siteId/hand-over',
                    lazy: () => import('../features/on-call/hand-over-page'),
                  },
                  { path: '/admin/people', lazy: () => import('../features/people/people-page') },
                  { path: '/admin/mail', lazy: () => import('../features/mail/mail-page') },
                  { path: '/admin/intake', lazy: () => import('../features/intake/intake-page') },
                  { path: '/admin/storage', lazy: () => import('../features/storage/storage-page') },
                  { path: '/admin/record', lazy: () => import('../features/record/record-page') },
                  { path: '/profile', lazy: () => import('../features/auth/profile-page') },
                  { path: '*', element: <NotFound /> },
                ],
              },
            ],
          },
        ],
      },
    ],
  },
]);
