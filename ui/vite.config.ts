import react from '@vitejs/plugin-react';
import { defineConfig } from 'vite';

const service = process.env.SERVICE_URL ?? 'http://127.0.0.1:4600';

export default defineConfig({
  plugins: [react()],
  server: {
    port: 5173,
    proxy: { '/api': service, '/health': service, '/socket.io': { target: service, ws: true } },
  },
  build: {
    target: 'es2022',
    rolldownOptions: {
      output: {
        codeSplitting: {
          groups: [
            { name: 'charts', test: /node_modules[\\/](recharts|@mantine[\\/]charts|d3-|victory|uplot)/ },
            { name: 'mantine', test: /node_modules[\\/]@mantine/ },
            { name: 'react', test: /node_modules[\\/](react|react-dom|react-router|scheduler)/ },
          ],
        },
      },
    },
  },
});
