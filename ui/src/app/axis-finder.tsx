import { Autocomplete } from '@mantine/core';
import { useHotkeys } from '@mantine/hooks';
import { useQuery } from '@tanstack/react-query';
import { useRef, useState } from 'react';
import { useNavigate } from 'react-router-dom';
import { axesQuery } from '../features/fleet/fleet-api';

/** "/" puts the cursor here; a tag or part of a name leads to the axis. */
export function AxisFinder() {
  const input = useRef<HTMLInputElement>(null);
  const [text, setText] = useState('');
  const navigate = useNavigate();
  const { data } = useQuery(axesQuery({}));
  useHotkeys([['/', () => input.current?.focus()]]);
  const axes = data?.items ?? [];
  return (
    <Autocomplete
      ref={input}
      visibleFrom="sm"
      aria-label="Find an axis"
      placeholder="Find an axis …"
      rightSection={<span className="soft">/</span>}
      rightSectionPointerEvents="none"
      w={210}
      limit={8}
      value={text}
      onChange={setText}
      data={[...new Set(axes.map(({ tag, siteName }) => `${tag} · ${siteName}`))]}
      onOptionSubmit={(value) => {
        const axis = axes.find(({ tag, siteName }) => `${tag} · ${siteName}` === value);
        if (axis) void navigate(`/axes/${axis.id}`);
        setText('');
        input.current?.blur();
      }}
    />
  );
}
