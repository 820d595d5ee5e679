import { useSyncExternalStore } from 'react';
import { getSession, onSession } from './session';

export const useSession = () => useSyncExternalStore(onSession, getSession);
