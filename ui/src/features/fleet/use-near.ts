import { useEffect, useState, type RefObject } from 'react';
import { flushSync } from 'react-dom';

/** How far beyond the window still counts as near, px. */
const MARGIN = 500;

const listeners = new Map<Element, (near: boolean) => void>();
let observer: IntersectionObserver | null = null;

function observe(element: Element, listener: (near: boolean) => void): () => void {
  observer ??= new IntersectionObserver(
    (entries) => {
      for (const { target, isIntersecting } of entries) listeners.get(target)?.(isIntersecting);
    },
    { rootMargin: `${MARGIN}px 0px` },
  );
  listeners.set(element, listener);
  observer.observe(element);
  return () => {
    listeners.delete(element);
    observer?.unobserve(element);
  };
}

if (typeof window !== 'undefined')
  // On paper everything is near.
  window.addEventListener('beforeprint', () =>
    flushSync(() => {
      for (const listener of listeners.values()) listener(true);
    }),
  );

/**
 * Whether an element is in the window or close to it. Of several hundred tiles only these are drawn and follow live
 * values; the words of all of them stay in the page, to be found and printed.
 */
export function useNear(ref: RefObject<Element | null>): boolean {
  const [near, setNear] = useState(() => typeof IntersectionObserver === 'undefined');
  useEffect(() => {
    if (!ref.current || typeof IntersectionObserver === 'undefined') return;
    return observe(ref.current, setNear);
  }, [ref]);
  return near;
}
