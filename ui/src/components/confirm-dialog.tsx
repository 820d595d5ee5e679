import { Button, Group, Modal } from '@mantine/core';
import type { ReactNode } from 'react';

/** Asks once, names the thing, and says what the button does. */
export function ConfirmDialog({
  opened,
  title,
  children,
  confirmLabel,
  danger = false,
  disabled = false,
  loading = false,
  problem,
  onConfirm,
  onClose,
}: {
  opened: boolean;
  title: string;
  children?: ReactNode;
  confirmLabel: string;
  danger?: boolean;
  disabled?: boolean;
  loading?: boolean;
  problem?: string | null;
  onConfirm: () => void;
  onClose: () => void;
}) {
  return (
    <Modal
      opened={opened}
      onClose={onClose}
      title={title}
      closeButtonProps={{ 'aria-label': 'Close' }}
      centered
    >
      <form
        onSubmit={(event) => {
          event.preventDefault();
          onConfirm();
        }}
      >
        {children}
        {problem && (
          <p role="alert" style={{ color: 'var(--out)', fontWeight: 560 }}>
            {problem}
          </p>
        )}
        <Group justify="flex-end" mt="lg">
          <Button variant="default" onClick={onClose}>
            Cancel
          </Button>
          <Button
            type="submit"
            loading={loading}
            disabled={disabled}
            {...(danger && { color: 'var(--out)' })}
          >
            {confirmLabel}
          </Button>
        </Group>
      </form>
    </Modal>
  );
}
