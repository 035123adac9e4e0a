"""Plain FP32 training in PyTorch of the two networks that the training benchmarks use."""

import csv
import pathlib
import subprocess
import time

import numpy as np
import torch
from torch import nn

BATCH = 64

# The layers in Ulpine's words and in PyTorch's.
NETS = {
    "lenet": (
        (1, 28, 28),
        ["conv2d out=8 size=5", "relu", "maxpool size=2", "conv2d out=16 size=5", "relu", "maxpool size=2",
         "dense 120", "relu", "dense 10"],
        lambda: nn.Sequential(
            nn.Conv2d(1, 8, 5), nn.ReLU(), nn.MaxPool2d(2), nn.Conv2d(8, 16, 5), nn.ReLU(), nn.MaxPool2d(2),
            nn.Flatten(), nn.Linear(256, 120), nn.ReLU(), nn.Linear(120, 10)),
    ),
    "mlp": (
        (784,),
        ["dense 256", "relu", "dense 128", "relu", "dense 10"],
        lambda: nn.Sequential(nn.Linear(784, 256), nn.ReLU(), nn.Linear(256, 128), nn.ReLU(), nn.Linear(128, 10)),
    ),
}

PLAN = """
title = "One training, for comparison with PyTorch"
[task]
data = "npy"
archive = "{data}"
train_inputs = "x"
train_labels = "y"
test_inputs = "x"
test_labels = "y"
scale = "none"
[network]
layers = {layers}
[training]
optimizer = {{ kind = "sgd", momentum = 0.9 }}
learning_rate = 0.03125
batch = 64
epochs = 4
shuffle = false
[replicates]
count = 2
first_seed = 1
[claim]
metric = "test accuracy"
margin = 0.1
[[arm]]
name = "bf16"
storage = "bf16"
"""


class Trainer:
    """One training, step by step, of numbers drawn once."""

    def __init__(self, name):
        shape, self.layers, make = NETS[name]
        torch.manual_seed(1)
        self.net = make()
        draw = np.random.default_rng(1)
        self.x = draw.uniform(-1, 1, (4 * BATCH, *shape)).astype(np.float32)
        self.y = self.x.reshape(len(self.x), -1)[:, :10].argmax(1).astype(np.int64)
        self.inputs, self.labels = torch.from_numpy(self.x), torch.from_numpy(self.y)
        self.optimizer = torch.optim.SGD(self.net.parameters(), 0.03125, momentum=0.9)
        self.loss, self.at = nn.CrossEntropyLoss(), 0

    def step(self):
        batch = slice(self.at, self.at + BATCH)
        self.at = (self.at + BATCH) % len(self.x)
        self.optimizer.zero_grad(set_to_none=True)
        loss = self.loss(self.net(self.inputs[batch]), self.labels[batch])
        loss.backward()
        self.optimizer.step()
        return loss

    def rate(self, span):
        """Examples a second: of the fastest step in a span of seconds."""
        best, end = 1e9, time.thread_time() + span
        while time.thread_time() < end:
            start = time.thread_time()
            self.step()
            best = min(best, time.thread_time() - start)
        return BATCH / best

    def check(self, ulpine, folder):
        """Ends the script unless PyTorch, from Ulpine's initial weights, has Ulpine's
        losses within 0.1 %: the same network, data, order and update."""
        folder = pathlib.Path(folder)
        np.savez(folder / "data.npz", x=self.x, y=self.y)
        layers = "[" + ", ".join(f'"{layer}"' for layer in self.layers) + "]"
        (folder / "plan.toml").write_text(PLAN.format(data=folder / "data.npz", layers=layers))
        store = ["--store", str(folder / "store")]
        for verb in (["run", str(folder / "plan.toml"), "--no-report", "--quiet"],
                     ["show", "baseline/1", "--weights", str(folder / "w.npz"), "--curve", str(folder / "c.csv")]):
            subprocess.run([ulpine, *verb, *store], check=True, stdout=subprocess.DEVNULL)
        (folder / "store").unlink()
        weights = [w for name, w in np.load(folder / "w.npz").items() if name.startswith("initial/")]
        with torch.no_grad():
            for mine, its in zip(self.net.parameters(), weights, strict=True):
                mine.copy_(torch.from_numpy(its).reshape(mine.shape))
        with open(folder / "c.csv") as f:
            rows = [r for r in csv.reader(line for line in f if not line.startswith("#"))]
        column = rows[0].index("loss")
        for number, row in enumerate(rows[1:], 1):
            want, got = float(row[column]), self.step().item()
            if abs(got - want) > 1e-3 * abs(want):
                raise SystemExit(f"step {number}: PyTorch's loss is {got}, Ulpine's {want}: not the same training")
