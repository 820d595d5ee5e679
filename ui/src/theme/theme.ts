import { createTheme, type CSSVariablesResolver, type MantineColorsTuple } from '@mantine/core';
import { palette } from './palette';

/** Verdigris: what can be pressed. */
const verdigris: MantineColorsTuple = [
  '#e8f4f1',
  '#d3e6e1',
  '#a8cdc5',
  '#7ab3a8',
  '#549d90',
  '#3c9081',
  '#1b7468',
  '#196a5e',
  '#115b50',
  '#034b41',
];

/** Mantine's greys of the dark scheme, as ours: 0 text, 2 dimmed, 4 border, 5 hover, 6 field, 7 ground. */
const dark: MantineColorsTuple = [
  palette.dark.ink,
  '#C8CAC8',
  palette.dark.soft,
  '#7C8894',
  palette.dark.rule,
  '#263039',
  palette.dark.surface,
  palette.dark.ground,
  '#10151B',
  '#0B0F14',
];

export const theme = createTheme({
  fontFamily: "'Work Sans Variable', 'Work Sans', system-ui, sans-serif",
  fontSizes: { xs: '12px', sm: '13px', md: '15px', lg: '18px', xl: '26px' },
  headings: { fontFamily: "'Work Sans Variable', 'Work Sans', system-ui, sans-serif", fontWeight: '620' },
  colors: { verdigris, dark },
  primaryColor: 'verdigris',
  primaryShade: { light: 6, dark: 4 },
  defaultRadius: 4,
  cursorType: 'pointer',
  respectReducedMotion: true,
  autoContrast: true,
  // Dark letters on the dark scheme's lighter verdigris: white would have 3.2:1 there.
  luminanceThreshold: 0.22,
});

/** Our colours by meaning, for both schemes, and Mantine's own grounds set to them. */
export const cssVariables: CSSVariablesResolver = () => {
  const variables = (scheme: keyof typeof palette): Record<string, string> => ({
    ...Object.fromEntries(Object.entries(palette[scheme]).map(([name, value]) => [`--${name}`, value])),
    '--mantine-color-body': palette[scheme].ground,
    '--mantine-color-text': palette[scheme].ink,
    '--mantine-color-dimmed': palette[scheme].soft,
    '--mantine-color-default-border': palette[scheme].rule,
    '--mantine-color-default': palette[scheme].surface,
    '--mantine-color-error': palette[scheme].out,
    '--mantine-color-placeholder': palette[scheme].soft,
    '--mantine-color-anchor': palette[scheme].press,
    '--mantine-color-verdigris-outline': palette[scheme].press,
    '--mantine-color-verdigris-text': palette[scheme].press,
  });
  return { variables: {}, light: variables('light'), dark: variables('dark') };
};
