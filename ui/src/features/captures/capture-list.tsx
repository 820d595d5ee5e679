import { Link } from 'react-router-dom';
import { significant } from '../../components/quantity';
import { ScrollX } from '../../components/scroll-x';
import { SiteTime } from '../../components/site-time';
import type { Capture } from './captures-api';

/** What became of a capture, in a word or two. */
export function captureWord({ status, recording, identification }: Capture): string {
  if (recording) return 'recording';
  if (status === 'queued') return 'waiting';
  if (status === 'running') return 'being worked out';
  if (status === 'failed') return 'failed';
  return identification?.verdict ?? 'done';
}

export function CaptureList({
  captures,
  ofAxis = false,
}: {
  captures: readonly Capture[];
  ofAxis?: boolean;
}) {
  return (
    <ScrollX label="Captures">
      <table className="plain-table">
        <thead>
          <tr>
            <th style={{ textAlign: 'left' }}>Capture</th>
            {!ofAxis && <th style={{ textAlign: 'left' }}>Axis</th>}
            <th style={{ textAlign: 'left' }}>Taken</th>
            <th style={{ textAlign: 'left' }}>Result</th>
            <th>K, (mm/s)/%</th>
            <th>α, rad/s</th>
          </tr>
        </thead>
        <tbody>
          {captures.map((capture) => (
            <tr key={capture.id}>
              <td style={{ textAlign: 'left' }}>
                <Link to={`/captures/${capture.id}`}>{capture.fileName}</Link>
              </td>
              {!ofAxis && (
                <td style={{ textAlign: 'left' }}>
                  {capture.axisId === null ? (
                    '–'
                  ) : (
                    <Link to={`/axes/${capture.axisId}`}>{capture.axisTag}</Link>
                  )}
                </td>
              )}
              <td style={{ textAlign: 'left' }}>
                <SiteTime at={capture.createdAt} timeZone={capture.timeZone} />{' '}
                <span className="soft small">{capture.createdBy ?? 'the service'}</span>
              </td>
              <td style={{ textAlign: 'left' }}>{captureWord(capture)}</td>
              <td>{capture.identification?.gain ? significant(capture.identification.gain.value) : '–'}</td>
              <td>{capture.identification?.pole ? significant(capture.identification.pole.value) : '–'}</td>
            </tr>
          ))}
        </tbody>
      </table>
    </ScrollX>
  );
}
