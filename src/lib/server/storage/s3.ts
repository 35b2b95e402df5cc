import { GetObjectCommand, PutObjectCommand, S3Client } from '@aws-sdk/client-s3';
import { checkedKey, type Storage } from './storage';

interface S3Settings {
	endpoint: string | undefined;
	bucket: string;
	region: string;
	accessKey: string;
	secretKey: string;
}

export function s3Storage(settings: S3Settings): Storage {
	const client = new S3Client({
		region: settings.region,
		...(settings.endpoint ? { endpoint: settings.endpoint, forcePathStyle: true } : {}),
		credentials: { accessKeyId: settings.accessKey, secretAccessKey: settings.secretKey },
		// Some stores keep the default checksums' framing inside the object.
		requestChecksumCalculation: 'WHEN_REQUIRED',
		responseChecksumValidation: 'WHEN_REQUIRED'
	});
	return {
		async put(key, bytes, type) {
			await client.send(
				new PutObjectCommand({
					Bucket: settings.bucket,
					Key: checkedKey(key),
					Body: bytes,
					ContentType: type
				})
			);
		},
		async get(key) {
			const found = await client.send(
				new GetObjectCommand({ Bucket: settings.bucket, Key: checkedKey(key) })
			);
			if (!found.Body) throw new Error('The object has no body');
			return Buffer.from(await found.Body.transformToByteArray());
		}
	};
}
