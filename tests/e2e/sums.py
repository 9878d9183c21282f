"""Independent of Lampsum: decodes raw luma by ffmpeg, linearises by Rec. ITU-R BT.709-6 item 1.2 (limited range,
black 16, white 235), adds integers, and compares with frameset.npz. Prints one line of JSON."""
import json, subprocess, sys
import numpy as np

clip, npz, width, height = sys.argv[1], sys.argv[2], int(sys.argv[3]), int(sys.argv[4])
raw = subprocess.run(['ffmpeg', '-v', 'error', '-i', clip, '-vf', 'extractplanes=y', '-fps_mode', 'passthrough', '-f', 'rawvideo', '-'], check=True, capture_output=True).stdout
luma = np.frombuffer(raw, np.uint8).reshape(-1, height, width)
v = (np.arange(256) - 16) / 219
e = np.where(v < 0.081, v / 4.5, ((np.maximum(v, 0) + 0.099) / 1.099) ** (1 / 0.45))
table = np.floor(50000 * np.maximum(e, 0) + 0.5).astype(np.uint32)
with np.load(npz, allow_pickle=False) as z:
    equal = [bool(np.array_equal(z['sums'][g], table[luma[first:first + count]].sum(axis=0, dtype=np.uint32))) for g, (first, count) in enumerate(zip(z['first_frame'], z['frames']))]
    lit = z['role'] > 0
    use = lit & (z['accepted'] == 1)
    # The same least squares by numpy, dark groups as a fourth column when there are any (frames times ambient light).
    dark = (z['role'] == 0) & (z['accepted'] == 1)
    rows = use | dark
    m = np.column_stack([z['integrals'], z['frames'].astype(float)]) if dark.any() else z['integrals']
    x, *_ = np.linalg.lstsq(m[rows], z['sums'][rows].reshape(rows.sum(), -1).astype(float), rcond=None)
    scale = np.abs(x[1:3]).max()
    solved = max(np.abs(x[1] - z['p'].ravel()).max(), np.abs(x[2] - z['q'].ravel()).max()) / scale
    print(json.dumps({'equal': equal, 'frames': int(len(luma)), 'solved': float(solved), 'dtypes': {k: str(z[k].dtype) for k in z.files}, 'shape': list(z['sums'].shape)}))
