/** What the service refused, in its own words, beside what was asked. */
export function Refusal({ error }: { error: Error }) {
  return (
    <p role="alert" style={{ color: 'var(--out)', fontWeight: 560, margin: 0 }}>
      {error.message}
    </p>
  );
}
