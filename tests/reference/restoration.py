"""Restorations by scikit-image and SciPy of the image that comes in as JSON: what tests/reference/restoration.test.ts compares with."""
import json
import sys

import numpy as np
from scipy.ndimage import convolve1d
from skimage import restoration

given = json.load(sys.stdin)
n = given['n']
image = np.array(given['image']).reshape(n, n)
y, x = np.mgrid[-5:6, -5:6]
psf = np.exp(-(x * x + y * y) / (2 * given['sigma'] ** 2))
psf /= psf.sum()

lucy = restoration.richardson_lucy(image, psf, num_iter=given['rounds'], clip=False)
# A regularisation that is the same at all frequencies: H* / (|H|^2 + balance).
wiener = restoration.wiener(image, psf, 1 / given['snr'], reg=np.ones((1, 1)), clip=False)

spline = np.array([1, 4, 6, 4, 1]) / 16
planes, smooth = [], image
for j in range(given['scales']):
    kernel = np.zeros(4 * 2 ** j + 1)
    kernel[:: 2 ** j] = spline
    smoother = convolve1d(convolve1d(smooth, kernel, axis=0, mode='mirror'), kernel, axis=1, mode='mirror')
    planes.append((smooth - smoother).ravel().tolist())
    smooth = smoother

json.dump({'lucy': lucy.ravel().tolist(), 'wiener': wiener.ravel().tolist(), 'planes': planes}, sys.stdout)
