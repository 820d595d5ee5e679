import { MantineProvider } from '@mantine/core';
import { render } from '@testing-library/react';
import type { ReactElement } from 'react';
import { MemoryRouter } from 'react-router-dom';
import { cssVariables, theme } from '../src/theme/theme';

/** Renders as the app does, without its session and its service. */
export const show = (element: ReactElement) =>
  render(element, {
    wrapper: ({ children }) => (
      <MantineProvider env="test" theme={theme} cssVariablesResolver={cssVariables}>
        <MemoryRouter>{children}</MemoryRouter>
      </MantineProvider>
    ),
  });
