import { BadRequestException, ValidationPipe, type INestApplication } from '@nestjs/common';
import { DocumentBuilder, SwaggerModule, type OpenAPIObject } from '@nestjs/swagger';
import cookieParser from 'cookie-parser';
import helmet from 'helmet';
import { fieldProblems, ProblemFilter } from './problem.filter.js';

/** What every way of running the service shares: prefix, checks, problem answers, the OpenAPI document. */
export function setup(app: INestApplication): OpenAPIObject {
  app.setGlobalPrefix('api/v1', { exclude: ['health/{*path}', 'metrics'] });
  app.use(
    helmet({
      contentSecurityPolicy: {
        directives: {
          'style-src': ["'self'", "'unsafe-inline'"],
          'img-src': ["'self'", 'data:'],
          'connect-src': ["'self'", 'ws:', 'wss:'],
          'upgrade-insecure-requests': null,
        },
      },
      strictTransportSecurity: false,
    }),
  );
  app.use(cookieParser());
  app.useGlobalFilters(new ProblemFilter());
  app.useGlobalPipes(
    new ValidationPipe({
      whitelist: true,
      forbidNonWhitelisted: true,
      transform: true,
      forbidUnknownValues: true,
      exceptionFactory: (errors) => new BadRequestException({ errors: fieldProblems(errors) }),
    }),
  );
  const document = SwaggerModule.createDocument(
    app,
    new DocumentBuilder()
      .setTitle('Polewright')
      .setDescription('Keeps fleets of position-controlled axes in tune.')
      .setVersion('1')
      .addBearerAuth()
      .build(),
  );
  SwaggerModule.setup('api/docs', app, document, { jsonDocumentUrl: 'api/v1/openapi.json' });
  app.enableShutdownHooks();
  return document;
}
