import { Counter } from 'prom-client';

export const signIns = new Counter({
  name: 'polewright_sign_in_total',
  help: 'Password checks by result',
  labelNames: ['result'] as const,
});

export const refusedTokens = new Counter({
  name: 'polewright_refused_token_total',
  help: 'Requests and connections refused for their access or refresh token, by reason',
  labelNames: ['reason'] as const,
});
