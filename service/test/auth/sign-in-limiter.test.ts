import 'reflect-metadata';
import { describe, expect, it } from 'vitest';
import { SignInLimiter, TooManyAttemptsException } from '../../src/auth/sign-in-limiter.js';

const MINUTE = 60_000;

describe('SignInLimiter', () => {
  it('lets ten failures on an account through in five minutes, then says when to come back', () => {
    const limiter = new SignInLimiter();
    for (let i = 0; i < 10; i++) limiter.attempt('a@x', `10.0.0.${i}`, i * 1000);
    const refused = () => limiter.attempt('a@x', '10.0.0.99', MINUTE);
    expect(refused).toThrow(TooManyAttemptsException);
    try {
      refused();
    } catch (error) {
      expect((error as TooManyAttemptsException).retryAfter).toBe(4 * 60);
    }
    expect(() => limiter.attempt('a@x', '10.0.0.99', 5 * MINUTE - 1)).toThrow();
    expect(() => limiter.attempt('a@x', '10.0.0.99', 5 * MINUTE)).not.toThrow();
  });

  it('counts an attempt from its start, so that a burst gets no more checks', () => {
    const limiter = new SignInLimiter();
    const started = Array.from({ length: 50 }, () => {
      try {
        return limiter.attempt('a@x', '10.0.0.1', 0);
      } catch {
        return null;
      }
    });
    expect(started.filter(Boolean)).toHaveLength(10);
  });

  it('forgets an account’s failures after a success, but not those of its address', () => {
    const limiter = new SignInLimiter();
    for (let round = 0; round < 3; round++) {
      for (let i = 0; i < 9; i++) limiter.attempt('a@x', '10.0.0.1', 0);
      limiter.attempt('a@x', '10.0.0.1', 0)();
    }
    for (let i = 0; i < 3; i++) limiter.attempt('b@x', '10.0.0.1', 0);
    expect(() => limiter.attempt('c@x', '10.0.0.1', 0)).toThrow(/from this address/);
    expect(() => limiter.attempt('c@x', '10.0.0.2', 0)).not.toThrow();
  });

  it('does not count what it refused, so that a storm on one account leaves its address free for others', () => {
    const limiter = new SignInLimiter();
    for (let i = 0; i < 500; i++)
      try {
        limiter.attempt('a@x', '10.0.0.1', i);
      } catch (error) {
        expect((error as Error).message).toMatch(/for this account/);
      }
    expect(() => limiter.attempt('b@x', '10.0.0.1', 500)).not.toThrow();
  });
});
