#!/usr/bin/env python3
"""Recomputes the bands of experiments/outside_test.go with PyTorch in FP32.

    bands.py MNIST_FOLDER FASHION_FOLDER SKLEARN_DATA_FOLDER

prints, for every set-up and several seeds, the test accuracy after the last
epoch. He initialisation as in package trainer (normal, variance 2/fan-in before a
relu, else 1/fan-in; zero biases), SGD with momentum, batches shuffled anew in every
epoch, a short last batch kept.
"""
import gzip
import sys

import numpy as np
import torch
from torch import nn

torch.set_num_threads(1)


def idx(path):
    with gzip.open(path) as f:
        raw = f.read()
    dims = [int.from_bytes(raw[4 + 4 * i : 8 + 4 * i], "big") for i in range(raw[3])]
    return np.frombuffer(raw, np.uint8, offset=4 + 4 * raw[3]).reshape(dims)


def images(folder, train):
    x = idx(folder + "/train-images-idx3-ubyte.gz")[:train, None] / np.float32(255)
    y = idx(folder + "/train-labels-idx1-ubyte.gz")[:train]
    u = idx(folder + "/t10k-images-idx3-ubyte.gz")[:2000, None] / np.float32(255)
    return x, y, u, idx(folder + "/t10k-labels-idx1-ubyte.gz")[:2000]


def rows(path, skip, last=0, divisor=0):
    """Tests on rows 0, 5, 10, ..., or on the last ones; standardised, or divided."""
    opener = gzip.open if path.endswith(".gz") else open
    with opener(path, "rt") as f:
        table = np.loadtxt(f, delimiter=",", skiprows=skip)
    x, y = table[:, :-1], table[:, -1].astype(int)
    test = np.arange(len(y)) % 5 == 0 if not last else np.arange(len(y)) >= len(y) - last
    if divisor:
        x = x / divisor
    else:
        x = (x - x[~test].mean(0)) / x[~test].std(0)
    return x[~test], y[~test], x[test], y[test]


def conv(inputs, outputs, size, pad):
    return nn.Conv2d(inputs, outputs, size, padding=pad)


def lenet():
    return nn.Sequential(
        conv(1, 6, 5, 2), nn.ReLU(), nn.MaxPool2d(2), conv(6, 16, 5, 0), nn.ReLU(), nn.MaxPool2d(2), nn.Flatten(),
        nn.Linear(400, 120), nn.ReLU(), nn.Linear(120, 84), nn.ReLU(), nn.Linear(84, 10))


def small():
    return nn.Sequential(
        conv(1, 8, 5, 2), nn.ReLU(), nn.MaxPool2d(2), conv(8, 16, 3, 1), nn.ReLU(), nn.MaxPool2d(2), nn.Flatten(),
        nn.Linear(784, 64), nn.ReLU(), nn.Linear(64, 10))


def dense(features, hidden, classes):
    return lambda: nn.Sequential(nn.Linear(features, hidden), nn.ReLU(), nn.Linear(hidden, classes))


def accuracy(make, data, rate, batch, epochs, seed):
    torch.manual_seed(seed)
    net = make()
    layers = [m for m in net if isinstance(m, (nn.Conv2d, nn.Linear))]
    for m in layers:
        gain = 1.0 if m is layers[-1] else 2.0
        nn.init.normal_(m.weight, 0, (gain / m.weight[0].numel()) ** 0.5)
        nn.init.zeros_(m.bias)
    x, y, u, v = (torch.tensor(np.ascontiguousarray(a)) for a in data)
    x, u, y, v = x.float(), u.float(), y.long(), v.long()
    optimizer = torch.optim.SGD(net.parameters(), lr=rate, momentum=0.9)
    for _ in range(epochs):
        order = torch.randperm(len(y))
        for part in order.split(batch):
            optimizer.zero_grad()
            nn.functional.cross_entropy(net(x[part]), y[part]).backward()
            optimizer.step()
    with torch.no_grad():
        return float((net(u).argmax(1) == v).float().mean())


def main(mnist, fashion, tables):
    setups = {
        "iris 4-16-3": (dense(4, 16, 3), rows(tables + "/iris.csv", 1), 0.05, 16, 50),
        "wine 13-16-3": (dense(13, 16, 3), rows(tables + "/wine_data.csv", 1), 0.05, 16, 50),
        "breast cancer 30-16-2": (dense(30, 16, 2), rows(tables + "/breast_cancer.csv", 1), 0.05, 16, 50),
        "digits 64-64-10, every fifth": (dense(64, 64, 10), rows(tables + "/digits.csv.gz", 0, 0, 16), 0.1, 32, 50),
        "digits 64-64-10, last 360": (dense(64, 64, 10), rows(tables + "/digits.csv.gz", 0, 360, 16), 0.1, 32, 50),
        "MNIST LeNet-size, 10000 images, 1 epoch": (lenet, images(mnist, 10000), 0.01, 32, 1),
        "Fashion-MNIST small, 10000 images, 1 epoch": (small, images(fashion, 10000), 0.01, 32, 1),
    }
    for name, (make, data, rate, batch, epochs) in setups.items():
        scores = [accuracy(make, data, rate, batch, epochs, seed) for seed in range(8)]
        print(f"{name}: {min(scores):.4f} to {max(scores):.4f};", " ".join(f"{s:.4f}" for s in scores), flush=True)


main(*sys.argv[1:])
