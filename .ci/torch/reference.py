#!/usr/bin/env python3
"""Reference values for package trainer, by Debian's python3-torch in FP64.

Usage: reference.py FILE.json [SEED]
       reference.py follow TRAINING.json LOSSES.json

Builds small networks on random shapes from the texts that the trainer reads,
computes outputs, loss and gradients of one batch, then takes three optimizer
steps. Weights, inputs and hyper-parameters are binary32 numbers, so that both
sides start from the same values. Nothing here comes from the trainer.
"""
import json
import random
import sys

try:
    import numpy as np
    import torch
    import torch.nn.functional as F
except ImportError as missing:
    print(missing)
    sys.exit(3)  # the test takes this status for "no torch here", others for a fault

torch.set_default_dtype(torch.float64)
torch.set_num_threads(1)


def f32(x):
    """The binary32 number nearest to x, as a double."""
    return float(np.float32(x))


def pair(text, dims):
    parts = [int(p) for p in str(text).split("x")]
    return parts * dims if len(parts) == 1 else parts


class Net:
    """A network of layer texts; params in the trainer's order."""

    def __init__(self, shape, texts, rng):
        self.steps, self.params, self.buffers, self.order = [], [], [], []
        stack = []
        for text in texts:
            words = text.split()
            keys = dict(w.split("=") for w in words[1:] if "=" in w)
            bare = [w for w in words[1:] if "=" not in w]
            shape = self.add(words[0], keys, bare, list(shape), rng, stack)
        self.outputs = shape

    def weight(self, rng, *shape, centre=0.0):
        values = rng.uniform(-0.7, 0.7, size=shape) + centre
        w = torch.tensor(values.astype(np.float32).astype(np.float64), requires_grad=True)
        self.params.append(w)
        self.order.append(w)
        return w

    def add(self, kind, keys, bare, shape, rng, stack):
        dims = len(shape) - 1
        if kind == "dense":
            units, inputs = int(bare[0]), int(np.prod(shape))
            w, b = self.weight(rng, units, inputs), self.weight(rng, units)
            self.steps.append(lambda x, t: F.linear(x.flatten(1), w, b))
            return [units]
        if kind in ("conv1d", "conv2d"):
            size = pair(keys["width" if dims == 1 else "size"], dims)
            stride, pad = pair(keys.get("stride", 1), dims), pair(keys.get("pad", 0), dims)
            dilation, groups = pair(keys.get("dilation", 1), dims), int(keys.get("groups", 1))
            out = int(keys["out"])
            w = self.weight(rng, out, shape[0] // groups, *size)
            b = self.weight(rng, out)
            conv = F.conv1d if dims == 1 else F.conv2d
            step = lambda x, t: conv(x, w, b, stride, pad, dilation, groups)
        elif kind in ("maxpool", "avgpool"):
            size = pair(keys["size"], dims)
            stride = pair(keys.get("stride", keys["size"]), dims)
            pool = {("maxpool", 1): F.max_pool1d, ("maxpool", 2): F.max_pool2d,
                    ("avgpool", 1): F.avg_pool1d, ("avgpool", 2): F.avg_pool2d}[kind, dims]
            step = lambda x, t: pool(x, size, stride)
        elif kind == "globalavgpool":
            step = lambda x, t: x.flatten(2).mean(2)
        elif kind == "flatten":
            step = lambda x, t: x.flatten(1)
        elif kind == "leakyrelu":
            slope = f32(keys.get("slope", 0.01))
            step = lambda x, t: F.leaky_relu(x, slope)
        elif kind == "batchnorm":
            c, eps, share = shape[0], f32(keys.get("epsilon", 1e-5)), f32(keys.get("momentum", 0.1))
            w, b = self.weight(rng, c, centre=1.0), self.weight(rng, c)
            mean, var = torch.zeros(c), torch.ones(c)
            self.order.append((mean, var))
            step = lambda x, t: F.batch_norm(x, mean, var, w, b, t, share, eps)
        elif kind == "layernorm":
            eps = f32(keys.get("epsilon", 1e-5))
            w, b = self.weight(rng, *shape, centre=1.0), self.weight(rng, *shape)
            step = lambda x, t: F.layer_norm(x, tuple(shape), w, b, eps)
        elif kind == "recurrent":
            step = self.recurrent(int(keys["units"]), keys.get("cell", "elman"), keys.get("output", "last"), shape[0], rng)
        elif kind == "attention":
            step = self.attention(int(keys.get("heads", 1)), int(keys.get("width", shape[0])), keys.get("mask", "none"), shape[0], rng)
        elif kind == "residual":
            if bare[0] == "begin":
                cell = []
                stack.append(cell)

                def step(x, t):
                    cell.append(x)
                    return x
            else:
                cell = stack.pop()
                step = lambda x, t: x + cell.pop()
        else:
            step = {"relu": lambda x, t: F.relu(x), "tanh": lambda x, t: torch.tanh(x),
                    "sigmoid": lambda x, t: torch.sigmoid(x), "gelu": lambda x, t: F.gelu(x)}[kind]
        self.steps.append(step)
        if kind == "residual":
            return shape
        with torch.no_grad():
            return list(step(torch.ones(2, *shape), False).shape[1:])

    def recurrent(self, units, cell, output, channels, rng):
        """An Elman cell, or the gated unit of Cho et al. 2014, column by column."""
        gates = [(self.weight(rng, units, channels + units), self.weight(rng, units)) for _ in range(3 if cell == "gru" else 1)]

        def step(x, t):
            h, states = torch.zeros(x.shape[0], units), []
            for column in x.unbind(2):
                on = lambda gate, state: F.linear(torch.cat([column, state], 1), *gate)
                if cell == "gru":
                    z, r = torch.sigmoid(on(gates[0], h)), torch.sigmoid(on(gates[1], h))
                    h = z * h + (1 - z) * torch.tanh(on(gates[2], r * h))
                else:
                    h = torch.tanh(on(gates[0], h))
                states.append(h)
            return torch.stack(states, 2) if output == "all" else h

        return step

    def attention(self, heads, width, mask, channels, rng):
        """Self-attention over the positions of [channels, length]."""
        w, b = self.weight(rng, 3 * width, channels), self.weight(rng, 3 * width)
        wo, bo = self.weight(rng, channels, width), self.weight(rng, channels)

        def step(x, t):
            rows = x.transpose(1, 2)  # [n, length, channels]
            n, length = rows.shape[:2]
            q, k, v = (part.reshape(n, length, heads, -1).transpose(1, 2) for part in F.linear(rows, w, b).split(width, 2))
            score = q @ k.transpose(2, 3) * f32(1 / np.sqrt(width // heads))
            if mask == "causal":
                score = score.masked_fill(torch.ones(length, length).triu(1) > 0, -torch.inf)
            mixed = (torch.softmax(score, 3) @ v).transpose(1, 2).reshape(n, length, width)
            return F.linear(mixed, wo, bo).transpose(1, 2)

        return step

    def __call__(self, x, training=True):
        for step in self.steps:
            x = step(x, training)
        return x

    def values(self):
        out = []
        for o in self.order:
            o = torch.stack(o) if isinstance(o, tuple) else o
            out.append({"shape": list(o.shape), "values": o.detach().flatten().tolist()})
        return out


def loss_of(case, y, labels, targets):
    n = y.shape[0]
    if case["loss"] == "cross-entropy":
        return F.cross_entropy(y, labels, label_smoothing=case["label_smoothing"])
    if case["loss"] == "huber":
        return F.huber_loss(y, targets, reduction="sum", delta=case["huber_width"]) / n
    return 0.5 * F.mse_loss(y, targets, reduction="sum") / n


def optimizer_of(o, params):
    rate, decay = 0.0625, o.get("WeightDecay", 0.0)  # their product is a binary32 number
    if o["Kind"] in ("sgd", "nesterov"):
        return torch.optim.SGD(params, rate, o.get("Momentum", 0.0), weight_decay=decay, nesterov=o["Kind"] == "nesterov")
    make = torch.optim.AdamW if o["Kind"] == "adamw" else torch.optim.Adam
    betas = (o.get("Beta1", f32(0.9)), o.get("Beta2", f32(0.999)))
    return make(params, rate, betas, o.get("Epsilon", f32(1e-8)), weight_decay=decay)


def run(case, rng):
    n, shape = case["batch"], case["input"]
    net = Net(shape, case["layers"], rng)
    outputs = int(np.prod(net.outputs))
    x = torch.tensor(rng.uniform(-1, 1, size=[n] + shape).astype(np.float32).astype(np.float64))
    labels = torch.tensor(rng.integers(0, outputs, size=n))
    targets = torch.tensor(rng.uniform(-2, 2, size=[n, outputs]).astype(np.float32).astype(np.float64))
    case.update(x=x.flatten().tolist(), labels=labels.tolist(), targets=targets.flatten().tolist(),
                outputs=outputs, start=net.values())
    optimizer = optimizer_of(case["optimizer"], net.params)
    for step in range(3):
        optimizer.zero_grad()
        y = net(x).flatten(1)
        loss = loss_of(case, y, labels, targets)
        loss.backward()
        if step == 0:
            case["y"], case["loss_value"] = y.flatten().tolist(), loss.item()
            case["gradients"] = [p.grad.flatten().tolist() for p in net.params]
        optimizer.step()
    case["end"] = net.values()
    with torch.no_grad():
        case["evaluated"] = net(x, False).flatten().tolist()
    return case


def cases(r):
    """Networks with every kind of layer but dropout, whose masks are the trainer's own."""
    sgd = {"Kind": "sgd", "Momentum": f32(0.9)}
    a, b, c = r.randint(2, 5), r.randint(5, 9), r.randint(7, 12)
    out = []

    def case(name, shape, layers, optimizer=sgd, loss="cross-entropy", **more):
        out.append(dict({"label_smoothing": 0.0, "huber_width": 1.0}, name=name, input=shape, layers=layers,
                        optimizer=optimizer, loss=loss, batch=r.randint(3, 6), **more))

    for act in ("relu", "leakyrelu slope=0.125", "tanh", "sigmoid", "gelu"):
        case(act, [b], [f"dense {c}", act, f"dense {a}"])
    case("conv1d", [a, 3 * c], ["conv1d out=4 width=5 stride=2 pad=2", "tanh", f"conv1d out={b} width=3 dilation=3", "dense 3"])
    case("conv2d", [a, c, c + 2], ["conv2d out=3 size=3x2 stride=2x1 pad=1", "gelu", "conv2d out=4 size=2 dilation=2x3 pad=1x2", "dense 3"])
    case("groups", [4, c, c], ["conv2d out=8 size=3 groups=4 pad=1", "tanh", "conv2d out=6 size=3 stride=2 groups=2", "dense 3"])
    case("depthwise", [a, 2 * c], [f"conv1d out={a} width=3 groups={a}", "tanh", f"conv1d out={2 * a} width=3 groups={a} dilation=2", "dense 3"])
    case("maxpool", [a, c, c], ["conv2d out=3 size=2", "maxpool size=3 stride=2", "dense 3"])
    case("avgpool", [a, c, c], ["conv2d out=3 size=2", "avgpool size=3x2 stride=2x1", "flatten", "dense 3"])
    case("pools of a length", [a, 3 * c], ["conv1d out=3 width=2", "maxpool size=2", "avgpool size=3 stride=2", "dense 3"])
    case("globalavgpool", [a, c, c], ["conv2d out=5 size=3", "tanh", "globalavgpool", "dense 3"])
    case("batchnorm", [a, c, c], ["conv2d out=3 size=2", "tanh", "batchnorm epsilon=0.001 momentum=0.25", "relu", "dense 3"])
    case("batchnorm of features", [b], [f"dense {c}", "tanh", "batchnorm", "dense 3"])
    case("layernorm", [a, 2 * c], ["conv1d out=3 width=4", "layernorm epsilon=0.001", "gelu", "dense 5", "layernorm", "dense 3"])
    case("residual", [a, c, c], ["conv2d out=4 size=3 pad=1", "residual begin", "conv2d out=4 size=3 pad=1", "tanh",
                                 "residual begin", "sigmoid", "residual end", "residual end", "globalavgpool", "dense 3"])
    case("recurrent", [a, b], [f"conv1d out={a} width=2", f"recurrent units={b}", "dense 3"])
    case("recurrent, all states", [a, b], [f"recurrent units={a} output=all", f"recurrent units={b} output=all", "dense 3"])
    case("gated", [a, b], [f"conv1d out={a} width=2", f"recurrent units={b} cell=gru", "dense 3"])
    case("gated, all states", [a, b], [f"recurrent units={a} cell=gru output=all", f"recurrent units={b} cell=gru output=all", "dense 3"])
    case("attention", [a, c], [f"conv1d out={b} width=2", f"attention heads=1 width={a}", "dense 3"])
    case("attention heads", [a, c], ["attention heads=2 width=6", f"conv1d out={b} width=2", f"attention heads=3 width={3 * a}", "globalavgpool", "dense 3"])
    case("causal attention", [4, c], ["conv1d out=4 width=1", "residual begin", "layernorm", "attention heads=2 mask=causal", "residual end", "dense 3"])
    mlp = [f"dense {c}", "tanh", f"dense {a}"]
    case("label smoothing", [b], mlp, label_smoothing=0.125)
    case("squared error", [b], mlp, loss="mean-squared-error")
    case("huber", [b], mlp, loss="huber", huber_width=0.5)
    for o in ({"Kind": "sgd"}, {"Kind": "sgd", "Momentum": f32(0.9), "WeightDecay": 0.125},
              {"Kind": "nesterov", "Momentum": f32(0.9)}, {"Kind": "nesterov", "Momentum": 0.5, "WeightDecay": 0.0625},
              {"Kind": "adam"}, {"Kind": "adam", "WeightDecay": 0.125, "Epsilon": 0.125, "Beta1": 0.75, "Beta2": 0.875},
              {"Kind": "adamw", "WeightDecay": 0.125}):
        case("optimizer " + json.dumps(o), [b], mlp, optimizer=o)
    return out


def follow(path):
    """FP64 losses of a training that the trainer describes: same start, data and batches."""
    with open(path) as f:
        case = json.load(f)
    net = Net(case["input"], case["layers"], np.random.default_rng(0))
    with torch.no_grad():
        for p, values in zip(net.params, case["start"], strict=True):
            p.copy_(torch.tensor(values).reshape(p.shape))
    x = torch.tensor(case["x"]).reshape([-1] + case["input"])
    labels = torch.tensor(case["labels"])
    optimizer = torch.optim.SGD(net.params, case["rate"], case["momentum"])
    losses = []
    for batch in case["batches"]:
        optimizer.zero_grad()
        loss = F.cross_entropy(net(x[batch]).flatten(1), labels[batch])
        loss.backward()
        optimizer.step()
        losses.append(loss.item())
    return losses


def main():
    if len(sys.argv) > 3 and sys.argv[1] == "follow":
        with open(sys.argv[3], "w") as f:
            json.dump(follow(sys.argv[2]), f)
        return
    seed = int(sys.argv[2]) if len(sys.argv) > 2 else 1
    rng = np.random.default_rng(seed)
    made = [run(c, rng) for c in cases(random.Random(seed))]
    with open(sys.argv[1], "w") as f:
        json.dump({"torch": torch.__version__, "seed": seed, "cases": made}, f)


main()
