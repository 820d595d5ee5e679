import { HttpException, HttpStatus, Injectable } from '@nestjs/common';

/** ms */
const WINDOW = 5 * 60_000;
/** Failures within the window; common practice, no source. */
const ACCOUNT_LIMIT = 10;
/** A site's people often share one address, so that it may fail more often than one account. */
const ADDRESS_LIMIT = 30;
/** Keys kept before old ones are cleared out. */
const MAX_KEYS = 20_000;

export class TooManyAttemptsException extends HttpException {
  constructor(
    what: string,
    /** s */
    readonly retryAfter: number,
  ) {
    super(
      `Too many failed sign-ins ${what}. Try again in ${Math.ceil(retryAfter / 60)} min.`,
      HttpStatus.TOO_MANY_REQUESTS,
    );
  }
}

/**
 * Counts failed password checks by account and by address over the last five minutes, in memory. An attempt counts as
 * failed from its start, so that a burst in parallel gets no more checks than one after another. An attempt that is
 * refused here counts for nothing: a storm on one account does not shut out the others at its address.
 */
@Injectable()
export class SignInLimiter {
  private readonly failures = new Map<string, number[]>();

  /**
   * Starts an attempt.
   *
   * @param address of the client; null where somebody already signed in confirms their password
   * @returns what to call when the password was right
   * @throws TooManyAttemptsException when the account or the address has failed too often
   */
  attempt(account: string, address: string | null, now = Date.now()): () => void {
    const ofAccount = this.recent(`account ${account}`, now);
    const ofAddress = address === null ? null : this.recent(`address ${address}`, now);
    this.refuse(ofAccount, ACCOUNT_LIMIT, 'for this account', now);
    if (ofAddress) this.refuse(ofAddress, ADDRESS_LIMIT, 'from this address', now);
    ofAccount.push(now);
    ofAddress?.push(now);
    return () => {
      ofAccount.length = 0;
      const own = ofAddress?.indexOf(now) ?? -1;
      if (own >= 0) ofAddress?.splice(own, 1);
    };
  }

  private refuse(failures: number[], limit: number, what: string, now: number): void {
    const decisive = failures[failures.length - limit];
    if (decisive !== undefined)
      throw new TooManyAttemptsException(what, Math.ceil((decisive + WINDOW - now) / 1000));
  }

  private recent(key: string, now: number): number[] {
    if (this.failures.size > MAX_KEYS) this.clearOut(now);
    let failures = this.failures.get(key);
    if (!failures) this.failures.set(key, (failures = []));
    while (failures[0] !== undefined && failures[0] <= now - WINDOW) failures.shift();
    return failures;
  }

  private clearOut(now: number): void {
    for (const [key, failures] of this.failures)
      if ((failures.at(-1) ?? 0) <= now - WINDOW) this.failures.delete(key);
    for (const key of this.failures.keys()) {
      if (this.failures.size <= MAX_KEYS / 2) break;
      this.failures.delete(key);
    }
  }
}
