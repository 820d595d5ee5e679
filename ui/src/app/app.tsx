import { MantineProvider } from '@mantine/core';
import { Notifications } from '@mantine/notifications';
import { QueryClientProvider } from '@tanstack/react-query';
import { useEffect } from 'react';
import { RouterProvider } from 'react-router-dom';
import { sendKept } from '../api/kept-acknowledgements';
import { followSession } from '../api/live';
import { queryClient } from '../api/query-client';
import { refreshSession, signedOut } from '../api/session';
import { cssVariables, theme } from '../theme/theme';
import { router } from './router';

export function App() {
  useEffect(() => {
    refreshSession().catch(signedOut);
    const unfollow = followSession();
    const stopSending = sendKept();
    return () => {
      unfollow();
      stopSending();
    };
  }, []);
  return (
    <MantineProvider theme={theme} cssVariablesResolver={cssVariables} defaultColorScheme="auto">
      <Notifications position="top-right" />
      <QueryClientProvider client={queryClient}>
        <RouterProvider router={router} />
      </QueryClientProvider>
    </MantineProvider>
  );
}
