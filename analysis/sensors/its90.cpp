// The ITS-90 reference and inverse functions of the letter-designated thermocouples.
// Source: NIST Monograph 175 (Burns, Scroger, Strouse, Croarkin, Guthrie 1993), as in the NIST ITS-90
// Thermocouple Database (SRD 60). Digits as printed; emf in mV, temperature in degC.
#include "analysis/sensors/its90.h"

namespace loadstair::sensors::its90 {
namespace {

constexpr double kBDirect1[] = {0.0,
                                -0.24650818346e-3,
                                0.59040421171e-5,
                                -0.13257931636e-8,
                                0.15668291901e-11,
                                -0.1694452924e-14,
                                0.62990347094e-18};
constexpr double kBDirect2[] = {-0.38938168621e1,   0.2857174747e-1,   -0.84885104785e-4,
                                0.15785280164e-6,   -0.16835344864e-9, 0.11109794013e-12,
                                -0.44515431033e-16, 0.98975640821e-20, -0.93791330289e-24};
constexpr double kBInverse1[] = {9.8423321e1, 6.99715e2,    -8.4765304e2, 1.0052644e3, -8.3345952e2,
                                 4.5508542e2, -1.5523037e2, 2.988675e1,   -2.474286};
constexpr double kBInverse2[] = {2.1315071e2, 2.8510504e2,   -5.2742887e1, 9.9160804,    -1.2965303,
                                 1.119587e-1, -6.0625199e-3, 1.8661696e-4, -2.4878585e-6};
constexpr DirectPiece kBDirect[] = {{0.0, 630.615, kBDirect1}, {630.615, 1820.0, kBDirect2}};
constexpr InversePiece kBInverse[] = {{0.291, 2.431, kBInverse1}, {2.431, 13.82, kBInverse2}};

constexpr double kEDirect1[] = {0.0,
                                0.58665508708e-1,
                                0.45410977124e-4,
                                -0.77998048686e-6,
                                -0.25800160843e-7,
                                -0.59452583057e-9,
                                -0.93214058667e-11,
                                -0.10287605534e-12,
                                -0.80370123621e-15,
                                -0.43979497391e-17,
                                -0.16414776355e-19,
                                -0.39673619516e-22,
                                -0.55827328721e-25,
                                -0.34657842013e-28};
constexpr double kEDirect2[] = {0.0,
                                0.5866550871e-1,
                                0.45032275582e-4,
                                0.28908407212e-7,
                                -0.33056896652e-9,
                                0.6502440327e-12,
                                -0.19197495504e-15,
                                -0.12536600497e-17,
                                0.21489217569e-20,
                                -0.14388041782e-23,
                                0.35960899481e-27};
constexpr double kEInverse1[] = {0.0,           1.6977288e1,   -4.351497e-1, -1.5859697e-1, -9.2502871e-2,
                                 -2.6084314e-2, -4.1360199e-3, -3.403403e-4, -1.156489e-5};
constexpr double kEInverse2[] = {0.0,           1.7057035e1,  -2.3301759e-1, 6.5435585e-3,  -7.3562749e-5,
                                 -1.7896001e-6, 8.4036165e-8, -1.3735879e-9, 1.0629823e-11, -3.2447087e-14};
constexpr DirectPiece kEDirect[] = {{-270.0, 0.0, kEDirect1}, {0.0, 1000.0, kEDirect2}};
constexpr InversePiece kEInverse[] = {{-8.825, 0.0, kEInverse1}, {0.0, 76.373, kEInverse2}};

constexpr double kJDirect1[] = {0.0,
                                0.50381187815e-1,
                                0.3047583693e-4,
                                -0.8568106572e-7,
                                0.13228195295e-9,
                                -0.17052958337e-12,
                                0.20948090697e-15,
                                -0.12538395336e-18,
                                0.15631725697e-22};
constexpr double kJDirect2[] = {0.29645625681e3,   -0.14976127786e1, 0.31787103924e-2,
                                -0.31847686701e-5, 0.15720819004e-8, -0.30691369056e-12};
constexpr double kJInverse1[] = {0.0,           1.9528268e1,   -1.2286185,   -1.0752178,   -5.9086933e-1,
                                 -1.7256713e-1, -2.8131513e-2, -2.396337e-3, -8.3823321e-5};
constexpr double kJInverse2[] = {0.0,          1.978425e1,  -2.001204e-1, 1.036969e-2,
                                 -2.549687e-4, 3.585153e-6, -5.344285e-8, 5.09989e-10};
constexpr double kJInverse3[] = {-3.11358187e3, 3.00543684e2,   -9.9477323,
                                 1.7027663e-1,  -1.43033468e-3, 4.73886084e-6};
constexpr DirectPiece kJDirect[] = {{-210.0, 760.0, kJDirect1}, {760.0, 1200.0, kJDirect2}};
constexpr InversePiece kJInverse[] = {
    {-8.095, 0.0, kJInverse1}, {0.0, 42.919, kJInverse2}, {42.919, 69.553, kJInverse3}};

constexpr double kKDirect1[] = {0.0,
                                0.39450128025e-1,
                                0.23622373598e-4,
                                -0.32858906784e-6,
                                -0.49904828777e-8,
                                -0.67509059173e-10,
                                -0.57410327428e-12,
                                -0.31088872894e-14,
                                -0.10451609365e-16,
                                -0.19889266878e-19,
                                -0.16322697486e-22};
constexpr double kKDirect2[] = {-0.17600413686e-1, 0.38921204975e-1,   0.18558770032e-4,  -0.99457592874e-7,
                                0.31840945719e-9,  -0.56072844889e-12, 0.56075059059e-15, -0.32020720003e-18,
                                0.97151147152e-22, -0.12104721275e-25};
constexpr double kKInverse1[] = {0.0,           2.5173462e1,   -1.1662878,    -1.0833638,   -8.977354e-1,
                                 -3.7342377e-1, -8.6632643e-2, -1.0450598e-2, -5.1920577e-4};
constexpr double kKInverse2[] = {0.0,          2.508355e1,  7.860106e-2, -2.503131e-1, 8.31527e-2,
                                 -1.228034e-2, 9.804036e-4, -4.41303e-5, 1.057734e-6,  -1.052755e-8};
constexpr double kKInverse3[] = {-1.318058e2,  4.830222e1,  -1.646031,  5.464731e-2,
                                 -9.650715e-4, 8.802193e-6, -3.11081e-8};
constexpr DirectPiece kKDirect[] = {{-270.0, 0.0, kKDirect1}, {0.0, 1372.0, kKDirect2}};
constexpr InversePiece kKInverse[] = {
    {-5.891, 0.0, kKInverse1}, {0.0, 20.644, kKInverse2}, {20.644, 54.886, kKInverse3}};

constexpr double kNDirect1[] = {0.0,
                                0.26159105962e-1,
                                0.10957484228e-4,
                                -0.93841111554e-7,
                                -0.46412039759e-10,
                                -0.26303357716e-11,
                                -0.22653438003e-13,
                                -0.76089300791e-16,
                                -0.93419667835e-19};
constexpr double kNDirect2[] = {0.0,
                                0.25929394601e-1,
                                0.1571014188e-4,
                                0.43825627237e-7,
                                -0.25261169794e-9,
                                0.64311819339e-12,
                                -0.10063471519e-14,
                                0.99745338992e-18,
                                -0.60863245607e-21,
                                0.20849229339e-24,
                                -0.30682196151e-28};
constexpr double kNInverse1[] = {0.0,       3.8436847e1, 1.1010485,    5.2229312,    7.2060525,
                                 5.8488586, 2.7754916,   7.7075166e-1, 1.1582665e-1, 7.3138868e-3};
constexpr double kNInverse2[] = {0.0,         3.86896e1,   -1.08267,  4.70205e-2,
                                 -2.12169e-6, -1.17272e-4, 5.3928e-6, -7.98156e-8};
constexpr double kNInverse3[] = {1.972485e1,  3.300943e1,   -3.915159e-1,
                                 9.855391e-3, -1.274371e-4, 7.767022e-7};
constexpr DirectPiece kNDirect[] = {{-270.0, 0.0, kNDirect1}, {0.0, 1300.0, kNDirect2}};
constexpr InversePiece kNInverse[] = {
    {-3.99, 0.0, kNInverse1}, {0.0, 20.613, kNInverse2}, {20.613, 47.513, kNInverse3}};

constexpr double kRDirect1[] = {0.0,
                                0.528961729765e-2,
                                0.139166589782e-4,
                                -0.238855693017e-7,
                                0.356916001063e-10,
                                -0.462347666298e-13,
                                0.500777441034e-16,
                                -0.373105886191e-19,
                                0.157716482367e-22,
                                -0.281038625251e-26};
constexpr double kRDirect2[] = {0.295157925316e1,   -0.252061251332e-2, 0.159564501865e-4,
                                -0.764085947576e-8, 0.205305291024e-11, -0.293359668173e-15};
constexpr double kRDirect3[] = {0.152232118209e3, -0.268819888545, 0.171280280471e-3, -0.345895706453e-7,
                                -0.934633971046e-14};
constexpr double kRInverse1[] = {0.0,        1.889138e2,  -9.383529e1,  1.3068619e2, -2.270358e2, 3.5145659e2,
                                 -3.89539e2, 2.8239471e2, -1.2607281e2, 3.1353611e1, -3.3187769};
constexpr double kRInverse2[] = {1.334584505e1,  1.472644573e2,  -1.844024844e1,  4.031129726,
                                 -6.24942836e-1, 6.468412046e-2, -4.458750426e-3, 1.994710149e-4,
                                 -5.31340179e-6, 6.481976217e-8};
constexpr double kRInverse3[] = {-8.199599416e1, 1.553962042e2,  -8.342197663,
                                 4.279433549e-1, -1.19157791e-2, 1.492290091e-4};
constexpr double kRInverse4[] = {3.406177836e4, -7.023729171e3, 5.582903813e2, -1.952394635e1,
                                 2.560740231e-1};
constexpr DirectPiece kRDirect[] = {
    {-50.0, 1064.18, kRDirect1}, {1064.18, 1664.5, kRDirect2}, {1664.5, 1768.1, kRDirect3}};
constexpr InversePiece kRInverse[] = {{-0.226, 1.923, kRInverse1},
                                      {1.923, 13.228, kRInverse2},
                                      {11.361, 19.739, kRInverse3},
                                      {19.739, 21.103, kRInverse4}};

constexpr double kSDirect1[] = {0.0,
                                0.540313308631e-2,
                                0.12593428974e-4,
                                -0.232477968689e-7,
                                0.322028823036e-10,
                                -0.331465196389e-13,
                                0.255744251786e-16,
                                -0.125068871393e-19,
                                0.271443176145e-23};
constexpr double kSDirect2[] = {0.132900444085e1, 0.334509311344e-2, 0.654805192818e-5, -0.164856259209e-8,
                                0.129989605174e-13};
constexpr double kSDirect3[] = {0.146628232636e3, -0.258430516752, 0.163693574641e-3, -0.330439046987e-7,
                                -0.943223690612e-14};
constexpr double kSInverse1[] = {0.0,          1.8494946e2,   -8.00504062e1, 1.0223743e2,   -1.52248592e2,
                                 1.88821343e2, -1.59085941e2, 8.2302788e1,   -2.34181944e1, 2.7978626};
constexpr double kSInverse2[] = {1.291507177e1,   1.466298863e2,  -1.534713402e1, 3.145945973,
                                 -4.163257839e-1, 3.187963771e-2, -1.2916375e-3,  2.183475087e-5,
                                 -1.447379511e-7, 8.211272125e-9};
constexpr double kSInverse3[] = {-8.087801117e1, 1.621573104e2,   -8.536869453,
                                 4.719686976e-1, -1.441693666e-2, 2.08161889e-4};
constexpr double kSInverse4[] = {5.333875126e4, -1.235892298e4, 1.092657613e3, -4.265693686e1, 6.24720542e-1};
constexpr DirectPiece kSDirect[] = {
    {-50.0, 1064.18, kSDirect1}, {1064.18, 1664.5, kSDirect2}, {1664.5, 1768.1, kSDirect3}};
constexpr InversePiece kSInverse[] = {{-0.235, 1.874, kSInverse1},
                                      {1.874, 11.95, kSInverse2},
                                      {10.332, 17.536, kSInverse3},
                                      {17.536, 18.693, kSInverse4}};

constexpr double kTDirect1[] = {0.0,
                                0.38748106364e-1,
                                0.44194434347e-4,
                                0.11844323105e-6,
                                0.20032973554e-7,
                                0.90138019559e-9,
                                0.22651156593e-10,
                                0.36071154205e-12,
                                0.38493939883e-14,
                                0.28213521925e-16,
                                0.14251594779e-18,
                                0.48768662286e-21,
                                0.1079553927e-23,
                                0.13945027062e-26,
                                0.79795153927e-30};
constexpr double kTDirect2[] = {0.0,
                                0.38748106364e-1,
                                0.3329222788e-4,
                                0.20618243404e-6,
                                -0.21882256846e-8,
                                0.10996880928e-10,
                                -0.30815758772e-13,
                                0.4547913529e-16,
                                -0.27512901673e-19};
constexpr double kTInverse1[] = {0.0,          2.5949192e1,  -2.1316967e-1, 7.9018692e-1,
                                 4.2527777e-1, 1.3304473e-1, 2.0241446e-2,  1.2668171e-3};
constexpr double kTInverse2[] = {0.0,          2.5928e1,    -7.602961e-1, 4.637791e-2,
                                 -2.165394e-3, 6.048144e-5, -7.293422e-7};
constexpr DirectPiece kTDirect[] = {{-270.0, 0.0, kTDirect1}, {0.0, 400.0, kTDirect2}};
constexpr InversePiece kTInverse[] = {{-5.603, 0.0, kTInverse1}, {0.0, 20.872, kTInverse2}};

}  // namespace

const Reference& reference(Thermocouple type) {
  static constexpr Reference kTable[] = {{'B', kBDirect, kBInverse}, {'E', kEDirect, kEInverse},
                                         {'J', kJDirect, kJInverse}, {'K', kKDirect, kKInverse},
                                         {'N', kNDirect, kNInverse}, {'R', kRDirect, kRInverse},
                                         {'S', kSDirect, kSInverse}, {'T', kTDirect, kTInverse}};
  return kTable[static_cast<std::size_t>(type)];
}

}  // namespace loadstair::sensors::its90
