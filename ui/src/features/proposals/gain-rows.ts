/** Name in the API, symbol and unit of each gain. */
export const GAIN_ROWS = [
  ['kp', 'Kp', '%/mm'],
  ['ki', 'Ki', '%/(mm·s)'],
  ['kd', 'Kd', '%·s/mm'],
  ['kv', 'Kv', '%·s/mm'],
  ['ka', 'Ka', '%·s²/mm'],
] as const;
