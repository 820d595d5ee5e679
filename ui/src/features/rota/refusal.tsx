import { Problem } from '../../api/client';

/** What the service refused, in its own words, beside what was asked; every place that it names on a line of its own. */
export function Refusal({ error }: { error: Error }) {
  const named = (error instanceof Problem && error.details.errors) || [];
  return (
    <div role="alert" style={{ color: 'var(--out)', fontWeight: 560 }}>
      {error.message}
      {named.length > 1 && (
        <ul style={{ margin: '4px 0 0', paddingLeft: 18, fontWeight: 400 }}>
          {named.map(({ path, message }, i) => (
            <li key={i}>
              {path}: {message}
            </li>
          ))}
        </ul>
      )}
    </div>
  );
}
