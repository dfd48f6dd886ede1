import {
  createHash,
  createPrivateKey,
  createPublicKey,
  generateKeyPairSync,
  type KeyObject,
  sign,
  verify,
} from 'node:crypto';

/** The Ed25519 key (RFC 8032) that signs checkpoints, made at first start. */
export interface SigningKey {
  readonly privateKey: KeyObject;
  /** SubjectPublicKeyInfo in PEM (RFC 8410), for labs to keep beside their checkpoints. */
  readonly publicKeyPem: string;
  /** SHA-256 of the public key in DER, hex: names the key in a checkpoint. */
  readonly keyId: string;
}

/** A new private key as PKCS #8 DER. */
export function newPrivateKey(): Uint8Array {
  return generateKeyPairSync('ed25519').privateKey.export({ format: 'der', type: 'pkcs8' });
}

export function signingKeyFrom(material: Uint8Array): SigningKey {
  const privateKey = createPrivateKey({ key: Buffer.from(material), format: 'der', type: 'pkcs8' });
  const publicKey = createPublicKey(privateKey);
  const der = publicKey.export({ format: 'der', type: 'spki' });
  return {
    privateKey,
    publicKeyPem: publicKey.export({ format: 'pem', type: 'spki' }).toString(),
    keyId: createHash('sha256').update(der).digest('hex'),
  };
}

/** Signature over the UTF-8 of a checkpoint document, base64. */
export function signDocument(key: SigningKey, document: string): string {
  return sign(null, Buffer.from(document, 'utf8'), key.privateKey).toString('base64');
}

export function signatureHolds(key: SigningKey, document: string, signature: string): boolean {
  const bytes = Buffer.from(signature, 'base64');
  return verify(null, Buffer.from(document, 'utf8'), createPublicKey(key.privateKey), bytes);
}
