import type { Axis } from './axis.js';
import { beyondTogether, checkedFault, type ActiveFault } from './faults.js';
import type { Gateway } from './gateway.js';
import { objectBody, Refused, type Answer, type Request } from './loopback-server.js';
import { plantOf, type PlantFigures } from './physics.js';
import type { Gains, Structure } from './controller.js';

/** The truth about an axis, which a real machine would not tell. */
export interface AxisTruth extends PlantFigures {
  tag: string;
  gateway: string;
  /** Axis time, s. */
  time: number;
  position: number;
  moving: boolean;
  atRest: boolean;
  maintenance: boolean;
  revision: number;
  structure: Structure;
  gains: Gains;
  faults: ActiveFault[];
}

/** K, α, f, b of the machine as it is now, computed from its physics, and the gains in its controller. */
export function truthOf(axis: Axis, gateway: string): AxisTruth {
  return {
    tag: axis.make.tag,
    gateway,
    ...plantOf(axis.physics),
    time: axis.time,
    position: axis.position,
    moving: axis.moving,
    atRest: axis.atRest,
    maintenance: axis.maintenance,
    revision: axis.revision,
    structure: axis.controller.structure,
    gains: axis.controller.gains,
    faults: axis.faults,
  };
}

/**
 * Answers for making and healing faults by hand:
 * `GET /health`, `GET /axes`, `GET /axes/:tag`, `POST /faults { axis, kind, amount?, rampSeconds? }`,
 * `DELETE /faults/:tag`.
 */
export function faultControl(
  axes: readonly { axis: Axis; gateway: string }[],
  gateways: readonly { name: string; gateway: Gateway }[],
): (request: Request) => Answer {
  const find = (tag: unknown) => {
    const found = axes.find(({ axis }) => axis.make.tag === tag);
    if (!found) throw new Refused(404, `there is no axis "${String(tag)}"`);
    return found;
  };
  return ({ method, path, query, body }) => {
    const unknown = [...query.keys()];
    if (unknown.length > 0)
      throw new Refused(
        400,
        'the query has keys that mean nothing here',
        unknown.map((key) => ({ path: key, message: 'is not known' })),
      );
    if (method === 'GET' && path === '/health')
      return {
        json: {
          status: 'running',
          axes: axes.length,
          gateways: gateways.map(({ name, gateway: { connected, buffer, refused } }) => ({
            name,
            connected,
            lastSequence: buffer.last,
            kept: buffer.size,
            dropped: buffer.dropped,
            refused: Object.fromEntries(refused),
          })),
        },
      };
    if (method === 'GET' && path === '/axes')
      return { json: { items: axes.map(({ axis, gateway }) => truthOf(axis, gateway)) } };
    if (method === 'GET' && path.startsWith('/axes/')) {
      const { axis, gateway } = find(path.slice('/axes/'.length));
      return { json: truthOf(axis, gateway) };
    }
    if (method === 'POST' && path === '/faults') {
      const wanted = objectBody(body, ['axis', 'kind', 'amount', 'rampSeconds']);
      if (typeof wanted.axis !== 'string')
        throw new Refused(400, 'the fault was not made', [{ path: 'axis', message: 'must be a tag' }]);
      const { axis, gateway } = find(wanted.axis);
      const fault = checkedFault(wanted.kind, wanted.amount, wanted.rampSeconds);
      if (Array.isArray(fault))
        throw new Refused(
          400,
          'the fault was not made',
          fault.map((message) => ({ path: message.split(' ')[0]!, message })),
        );
      const beyond = beyondTogether(axis.faults, fault);
      if (beyond) throw new Refused(409, 'the fault was not made', [{ path: 'amount', message: beyond }]);
      axis.addFault(fault);
      return { status: 201, json: truthOf(axis, gateway) };
    }
    if (method === 'DELETE' && path.startsWith('/faults/')) {
      const { axis, gateway } = find(path.slice('/faults/'.length));
      axis.heal();
      return { json: truthOf(axis, gateway) };
    }
    throw new Refused(404, `${method} ${path} is not known here`);
  };
}
