import '@fontsource-variable/work-sans/index.css';
import '@mantine/core/styles.css';
import '@mantine/notifications/styles.css';
import './theme/global.css';
import { StrictMode } from 'react';
import { createRoot } from 'react-dom/client';
import { App } from './app/app';

createRoot(document.getElementById('root')!).render(
  <StrictMode>
    <App />
  </StrictMode>,
);
