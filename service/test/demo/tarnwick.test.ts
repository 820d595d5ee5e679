import { expect, test } from 'vitest';
import { TARNWICK_AXES, TARNWICK_GATEWAYS, TARNWICK_SITES } from '../../../simulator/src/tarnwick.js';
import { AXES, GATEWAYS, SITES } from '../../src/demo/tarnwick.js';

// Two workspaces keep the same commissioning sheets, because the machines are not the service's to know.
test('the demo commissions the axes that the simulator runs', () => {
  expect(SITES).toEqual(TARNWICK_SITES);
  expect(GATEWAYS).toEqual(TARNWICK_GATEWAYS);
  const siteOf = new Map(TARNWICK_GATEWAYS.map(({ name, site }) => [name, site] as const));
  expect(AXES).toEqual(
    TARNWICK_AXES.map(({ tag, name, machine, gateway, actuator, resolution, sampleTime, ...sheet }) => ({
      tag,
      name,
      machine,
      site: siteOf.get(gateway as 'tile-hall-1'),
      actuator,
      resolution,
      sampleTime,
      travel: sheet.travel,
      structure: sheet.structure,
      lambda: sheet.lambda,
      feedForward: sheet.feedForward,
      baseline: { gainForward: null, gainReverse: null, ...sheet.baseline },
      tolerances: sheet.tolerances,
      move: sheet.move,
    })),
  );
});
