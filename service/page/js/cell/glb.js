// A surface from binary glTF 2.0: the one mesh that the service writes.

const MAGIC = 0x46546c67;
const JSON_CHUNK = 0x4e4f534a;
const BINARY_CHUNK = 0x004e4942;
const ARRAYS = { 5121: Uint8Array, 5123: Uint16Array, 5125: Uint32Array, 5126: Float32Array };
const SIZES = { SCALAR: 1, VEC3: 3 };

/** {position, normal, indices, extras} of a .glb; without triangles the arrays are empty. */
export function readGlb(buffer) {
  const view = new DataView(buffer);
  if (buffer.byteLength < 20 || view.getUint32(0, true) !== MAGIC || view.getUint32(4, true) !== 2) {
    throw new Error("The answer is no binary glTF of version 2.");
  }
  let at = 12;
  let document = null;
  let binary = 0;
  while (at + 8 <= buffer.byteLength) {
    const [length, kind] = [view.getUint32(at, true), view.getUint32(at + 4, true)];
    if (kind === JSON_CHUNK) document = JSON.parse(new TextDecoder().decode(new Uint8Array(buffer, at + 8, length)));
    else if (kind === BINARY_CHUNK) binary = at + 8;
    at += 8 + length;
  }
  const extras = document.asset?.extras ?? {};
  const primitive = document.meshes?.[0]?.primitives?.[0];
  if (!primitive) return { position: new Float32Array(), normal: null, indices: new Uint32Array(), extras };
  const read = (index) => {
    const accessor = document.accessors[index];
    const piece = document.bufferViews[accessor.bufferView];
    const start = binary + (piece.byteOffset ?? 0) + (accessor.byteOffset ?? 0);
    const count = accessor.count * SIZES[accessor.type];
    const Kind = ARRAYS[accessor.componentType];
    // Views are aligned in the file, but the chunk need not be in memory.
    const bytes = buffer.slice(start, start + count * Kind.BYTES_PER_ELEMENT);
    return new Kind(bytes);
  };
  const { POSITION, NORMAL } = primitive.attributes;
  const position = read(POSITION);
  const indices = primitive.indices === undefined ? Uint32Array.from({ length: position.length / 3 }, (_, i) => i) : read(primitive.indices);
  return { position, normal: NORMAL === undefined ? null : read(NORMAL), indices, extras };
}
