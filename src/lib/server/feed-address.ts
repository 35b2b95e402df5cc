import { config } from './config';

export const feedAddress = (token: string): string => `${config().origin}/calendar/${token}.ics`;
