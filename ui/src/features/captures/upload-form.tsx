import { Button, Progress, Select } from '@mantine/core';
import { useMutation, useQuery } from '@tanstack/react-query';
import { useRef, useState, type DragEvent } from 'react';
import { useNavigate } from 'react-router-dom';
import { Problem } from '../../api/client';
import { Card } from '../../components/card';
import { ScrollX } from '../../components/scroll-x';
import { axesQuery } from '../fleet/fleet-api';
import { uploadCapture, type Mapping } from './captures-api';
import classes from './captures.module.css';
import { guessMapping, guessUnit, readFileHead, type FileHead } from './file-head';

const TIME = ['s', 'ms', 'us'] as const;
const POSITION = ['mm', 'um', 'm', 'in'] as const;
const OUTPUT = ['percent', 'fraction', 'volts10'] as const;
const UNIT_WORDS: Record<string, string> = {
  us: 'µs',
  um: 'µm',
  in: 'inch',
  percent: '% of full output',
  fraction: 'fraction of full output',
  volts10: 'volts of ±10 V',
};
const LARGEST = 200 * 1024 * 1024;

interface Chosen {
  file: File;
  head: FileHead;
  columns: ReturnType<typeof guessMapping>;
  units: {
    time: (typeof TIME)[number];
    position: (typeof POSITION)[number];
    output: (typeof OUTPUT)[number];
  };
}

/** A CSV file, what its columns mean, and where it was taken. */
export function UploadForm({ axisId: from }: { axisId: number | null }) {
  const navigate = useNavigate();
  const picker = useRef<HTMLInputElement>(null);
  const [chosen, setChosen] = useState<Chosen | null>(null);
  const [unreadable, setUnreadable] = useState<string | null>(null);
  const [axisId, setAxisId] = useState(from);
  const [over, setOver] = useState(false);
  const [sent, setSent] = useState(0);
  const giveUp = useRef(new AbortController());
  const axes = useQuery(axesQuery({}));
  const upload = useMutation({
    mutationFn: ({ file, columns, units }: Chosen) => {
      giveUp.current = new AbortController();
      const { time, target, position, output } = columns;
      const mapping: Mapping = {
        time: time!,
        position: position!,
        output: output!,
        ...(target && { target }),
        units,
      };
      return uploadCapture({ file, mapping, axisId }, setSent, giveUp.current.signal);
    },
    onSuccess: (id) => navigate(`/captures/${id}`),
    onSettled: () => setSent(0),
  });
  const take = async (file: File | undefined): Promise<void> => {
    if (!file) return;
    upload.reset();
    setUnreadable(null);
    setChosen(null);
    if (file.size > LARGEST)
      return setUnreadable(`${file.name} is larger than 200 MB: cut it into shorter captures.`);
    try {
      const head = await readFileHead(file);
      const columns = guessMapping(head.columns);
      setChosen({
        file,
        head,
        columns,
        units: {
          time: guessUnit(columns.time, TIME, 's'),
          position: guessUnit(columns.position, POSITION, 'mm'),
          output: guessUnit(columns.output, OUTPUT, 'percent'),
        },
      });
    } catch (error) {
      setUnreadable(`${file.name}: ${(error as Error).message}`);
    }
  };
  const onDrop = (event: DragEvent): void => {
    event.preventDefault();
    setOver(false);
    void take(event.dataTransfer.files[0]);
  };
  const ready = chosen?.columns.time && chosen.columns.position && chosen.columns.output;
  return (
    <Card
      title="Upload a capture"
      sub="CSV with a row of names: time, position and output of one axis; at most 200 MB"
    >
      <div
        className={classes.drop}
        data-over={over || undefined}
        onDragOver={(event) => {
          event.preventDefault();
          setOver(true);
        }}
        onDragLeave={() => setOver(false)}
        onDrop={onDrop}
      >
        <input
          ref={picker}
          type="file"
          accept=".csv,.txt,text/csv,text/plain"
          aria-label="CSV file"
          className="visually-hidden"
          tabIndex={-1}
          onChange={(event) => {
            void take(event.currentTarget.files?.[0]);
            event.currentTarget.value = '';
          }}
        />
        <Button variant="outline" onClick={() => picker.current?.click()} disabled={upload.isPending}>
          Choose a file
        </Button>
        <span className="soft">
          {chosen ? `${chosen.file.name}, ${sizeOf(chosen.file.size)}` : 'or drop one here'}
        </span>
      </div>
      {unreadable && (
        <p role="alert" style={{ color: 'var(--out)', margin: '10px 0 0' }}>
          {unreadable}
        </p>
      )}
      {chosen && (
        <>
          <div className={classes.mapping}>
            {(['time', 'position', 'output', 'target'] as const).map((name) => (
              <div key={name}>
                <Select
                  label={name === 'target' ? 'target (may be left out)' : name}
                  placeholder="which column?"
                  clearable={name === 'target'}
                  data={[...new Set(chosen.head.columns)]}
                  value={chosen.columns[name]}
                  onChange={(column) =>
                    setChosen({ ...chosen, columns: { ...chosen.columns, [name]: column } })
                  }
                />
                {name !== 'target' && (
                  <Select
                    aria-label={`unit of ${name}`}
                    allowDeselect={false}
                    mt={6}
                    data={{ time: TIME, position: POSITION, output: OUTPUT }[name].map((value) => ({
                      value,
                      label: UNIT_WORDS[value] ?? value,
                    }))}
                    value={chosen.units[name]}
                    onChange={(unit) =>
                      unit && setChosen({ ...chosen, units: { ...chosen.units, [name]: unit } })
                    }
                  />
                )}
              </div>
            ))}
            <Select
              label="axis (may be left out)"
              placeholder="taken from which axis?"
              searchable
              clearable
              data={(axes.data?.items ?? []).map(({ id, tag, siteName }) => ({
                value: String(id),
                label: `${tag}, ${siteName}`,
              }))}
              value={axisId === null ? null : String(axisId)}
              onChange={(value) => setAxisId(value === null ? null : Number(value))}
            />
          </div>
          <ScrollX label="First rows of the file">
            <table className="plain-table">
              <thead>
                <tr>
                  {chosen.head.columns.map((column, i) => (
                    <th key={i}>
                      {column}
                      <div className="soft small">
                        {(['time', 'target', 'position', 'output'] as const).find(
                          (name) => chosen.columns[name] === column,
                        ) ?? ' '}
                      </div>
                    </th>
                  ))}
                </tr>
              </thead>
              <tbody>
                {chosen.head.rows.map((row, i) => (
                  <tr key={i}>
                    {row.map((cell, j) => (
                      <td key={j}>{cell}</td>
                    ))}
                  </tr>
                ))}
              </tbody>
            </table>
          </ScrollX>
          {upload.error && (
            <ul role="alert" style={{ color: 'var(--out)', margin: '10px 0 0', paddingLeft: 18 }}>
              {refusals(upload.error).map((message) => (
                <li key={message}>{message}</li>
              ))}
            </ul>
          )}
          <div style={{ display: 'flex', gap: 12, alignItems: 'center', marginTop: 14 }}>
            <Button disabled={!ready} loading={upload.isPending} onClick={() => upload.mutate(chosen)}>
              Upload and identify
            </Button>
            {upload.isPending && (
              <>
                <Progress value={100 * sent} aria-label="Upload" style={{ flex: 1, maxWidth: 320 }} />
                <span className="small soft" role="status">
                  {(100 * sent).toFixed(0)} %
                </span>
                <Button variant="default" onClick={() => giveUp.current.abort()}>
                  Give up
                </Button>
              </>
            )}
          </div>
        </>
      )}
    </Card>
  );
}

const refusals = (error: Error): string[] =>
  error instanceof Problem && error.details.errors?.length
    ? error.details.errors.map(({ message }) => message)
    : [error.message];

const sizeOf = (bytes: number): string =>
  bytes < 1e6 ? `${(bytes / 1e3).toFixed(0)} kB` : `${(bytes / 1e6).toFixed(1)} MB`;
