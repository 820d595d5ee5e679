/** Our sign: a tilted edge and a pole. */
export function Mark() {
  return (
    <svg width="26" height="20" viewBox="0 0 26 20" aria-hidden>
      <path d="M1 16L25 9" stroke="var(--ink)" strokeWidth="2" />
      <path d="M8.5 5.5l6 6m0-6l-6 6" stroke="var(--press)" strokeWidth="2.4" />
    </svg>
  );
}
