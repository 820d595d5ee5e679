import { QueryClient } from '@tanstack/react-query';
import { Problem } from './client';

export const queryClient = new QueryClient({
  defaultOptions: {
    queries: {
      staleTime: 5_000,
      // A refusal stays a refusal; only a service that does not answer is asked again.
      retry: (failures, error) => failures < 2 && !(error instanceof Problem && error.status < 500),
      refetchOnWindowFocus: true,
    },
    // Sent at once, connection or not: what cannot go out says so instead of waiting unseen.
    mutations: { retry: false, networkMode: 'always' },
  },
});
