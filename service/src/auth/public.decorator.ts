import { SetMetadata } from '@nestjs/common';

export const IS_PUBLIC = 'isPublic';
/** Opens a route to people who are not signed in; every other route asks for an access token. */
export const Public = () => SetMetadata(IS_PUBLIC, true);
