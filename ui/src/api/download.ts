/** Hands a file that the service answered with to the browser's downloads. */
export function saveFile(content: Blob, name: string): void {
  const url = URL.createObjectURL(content);
  const link = document.createElement('a');
  link.href = url;
  link.download = name;
  link.click();
  // The browser has taken the address by the next task.
  setTimeout(() => URL.revokeObjectURL(url));
}
