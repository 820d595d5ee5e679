import '@fontsource-variable/work-sans/index.css';
import '@mantine/core/styles.css';
import '@mantine/notifications/styles.css';
import './theme/global.css';
import { StrictMode } from 'react';
import { createRoot } from 'react-dom/client';
import { App } from './app/app';

// Only what was built: in development it would stand between the page and its changes.
if (import.meta.env.PROD) void navigator.serviceWorker?.register('/sw.js').catch(() => undefined);

createRoot(document.getElementById('root')!).render(
  <StrictMode>
    <App />
  </StrictMode>,
);
